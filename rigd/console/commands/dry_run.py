"""``rigd dry-run``: rehearse a recipe on the simulated rig in virtual time."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Iterator
from pathlib import Path

import click

from rigd.console.fault_words import FORM, parse_fault
from rigd.console.output import Output, json_option


@click.command(name="dry-run")
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("recipe", type=click.Path(path_type=Path))
@click.option("--seed", type=click.IntRange(min=1), default=None, help="Seed of noise; the rig file's if not given.")
@click.option("--fault", "faults", multiple=True, metavar="FAULT", help=f"Inject a fault: {FORM}. May be repeated.")
@click.option("--out", type=click.Path(path_type=Path, file_okay=False), help="Keep journal and report in this folder.")
@click.option("--deep", is_flag=True, help="The live shell, the drivers and every byte, in virtual time; much slower.")
@json_option
@click.pass_obj
def dry_run(
    output: Output, rig: Path, recipe: Path, seed: int | None, faults: tuple[str, ...], out: Path | None, deep: bool
) -> int:
    """Rehearse RECIPE on the simulated RIG, much faster than the clock.

    Exit 0: done. 1: tripped, or did not finish. 2: a file is wrong.
    """
    specs = tuple(parse_fault(text) for text in faults)
    from rigd.app import DrySettings
    from rigd.app import dry_run as rehearse
    from rigd.console.rehearsal import dry_facts, longest_ns, planned_s, rehearsed, show_progress, vessels_mL
    from rigd.console.timeline import rehearsal_view
    from rigd.logic.planning import plan
    from rigd.report.summary import summary
    from rigd.runtime.dry import DryOptions

    began = time.monotonic()
    expected_s = planned_s(rig, recipe)
    options = DryOptions(limit_ns=longest_ns(expected_s))
    with _journal(out) as journal, show_progress(output, expected_s) as watch:
        settings = DrySettings(seed or 0, specs, journal, watch, options, deep)
        done = rehearse(rig, recipe, settings)
    wall_s = time.monotonic() - began
    data = rehearsed(done, out)
    output.document(dry_facts(done, data, seed or 0, wall_s))
    output.say(summary(data))
    output.say(rehearsal_view(data, plan(done.program), done.result.peak, vessels_mL(done)))
    output.say(
        f"[dim]{done.result.end_ns / 1e9 / max(wall_s, 1e-9):.0f} × real time, digest {done.result.digest[:16]}[/]"
    )
    if out is not None:
        from rigd.report.page import write_page

        output.say(f"report: {write_page(data)}")
    return done.result.exit_code


@contextlib.contextmanager
def _journal(out: Path | None) -> Iterator[Path | None]:
    """Where the journal goes; ``UsageError`` when there is one already. A rehearsal that fails leaves none behind."""
    if out is None:
        yield None
        return
    path, made = out / "run.sqlite", not out.exists()
    if path.exists():
        raise click.UsageError(f"--out: {out} holds a run already; name another folder")
    out.mkdir(parents=True, exist_ok=True)
    try:
        yield path
    except BaseException:
        for part in out.glob("run*.sqlite*"):
            part.unlink()
        if made:
            out.rmdir()
        raise
