"""``rigd driver``: begin a driver package of one's own, list what is installed."""

from __future__ import annotations

import re
from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

import click

from rigd.console.output import Output, json_option

_NAME = re.compile(r"[a-z][a-z0-9]*(-[a-z0-9]+)*")


@click.group()
def driver() -> None:
    """Driver packages: what a protocol card cannot say, in Python."""


@driver.command()
@click.argument("name")
@click.argument("folder", type=click.Path(path_type=Path), required=False)
@click.pass_obj
def new(output: Output, name: str, folder: Path | None) -> int:
    """Write a package NAME ("my-valve") into FOLDER: an invented valve that passes the battery, to be changed.

    FOLDER is ./NAME if not given, and must not exist.
    """
    if not _NAME.fullmatch(name):
        raise click.UsageError(f"{name!r} cannot be a name: small letters, digits and single hyphens, as in my-valve")
    target = folder or Path(name)
    if target.exists():
        raise click.UsageError(f"{target} exists; choose another folder, nothing was overwritten")
    # by the path, not as a module: importing it would need the tools of the battery
    _copy(files("rigd").joinpath("conformance", "template"), target, name)
    output.say(f"written: {target}; next: cd {target}, pip install -e '.\\[test]', python -m pytest")
    return 0


@driver.command("list")
@json_option
@click.pass_obj
def list_drivers(output: Output) -> int:
    """List the installed driver families, and which package each comes from."""
    from rigd.adapters.plugins import driver_families

    rows = driver_families()
    output.document({"drivers": [{"name": name, "title": title, "origin": origin} for name, title, origin in rows]})
    for name, title, origin in rows:
        output.say(f"{name:16} {title} ({origin})")
    return 0


def _copy(source: Traversable, target: Path, name: str) -> None:
    target.mkdir(parents=True)
    package = name.replace("-", "_")
    for entry in source.iterdir():
        renamed = entry.name.removesuffix(".txt").replace("PACKAGE", package)
        if entry.is_dir():
            _copy(entry, target / renamed, name)
        elif entry.name.endswith(".txt"):
            text = entry.read_text(encoding="utf-8").replace("PACKAGE", package).replace("DISTRIBUTION", name)
            (target / renamed).write_text(text, encoding="utf-8")
