"""``rigd dry-run``: rehearse a recipe on the simulated rig in virtual time."""

from __future__ import annotations

import contextlib
import tempfile
import time
from collections.abc import Iterator
from dataclasses import replace
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
@click.option("--report", "page", type=click.Path(path_type=Path, dir_okay=False), metavar="FILE",
              help="Write the rehearsal as one HTML file with plots.")  # fmt: skip
@json_option
@click.pass_obj
def dry_run(
    output: Output,
    rig: Path,
    recipe: Path,
    seed: int | None,
    faults: tuple[str, ...],
    out: Path | None,
    deep: bool,
    page: Path | None,
) -> int:
    """Rehearse RECIPE on the simulated RIG, much faster than the clock.

    Exit 0: done. 1: tripped, or did not finish. 2: a file is wrong.
    """
    specs = tuple(parse_fault(text) for text in faults)
    from rigd.app import DrySettings
    from rigd.app import dry_run as rehearse
    from rigd.console.rehearsal import dry_facts, longest_ns, planned_s, rehearsed, show_progress, vessels_mL
    from rigd.console.timeline import rehearsal_view
    from rigd.logic.foresight import foreseen_plan
    from rigd.report.foreseen import foreseen
    from rigd.report.summary import summary
    from rigd.runtime.dry import DryOptions

    began = time.monotonic()
    expected_s = planned_s(rig, recipe)
    options = DryOptions(limit_ns=longest_ns(expected_s))
    with _journal(out, bool(page)) as journal:
        with show_progress(output, expected_s) as watch:
            settings = DrySettings(seed or 0, specs, journal, watch, options, deep)
            done = rehearse(rig, recipe, settings)
        wall_s = time.monotonic() - began
        data = rehearsed(done, journal)
    if out is None:
        data = replace(data, id="dry run", folder="")
    planned = foreseen_plan(done.program)
    wrong = foreseen(data, planned.problems)
    output.document({**dry_facts(done, data, seed or 0, wall_s), "foreseen": wrong})
    output.say(summary(data))
    output.say(rehearsal_view(data, planned, done.result.peak, vessels_mL(done)))
    output.say(
        f"[dim]{done.result.end_ns / 1e9 / max(wall_s, 1e-9):.0f} × real time, digest {done.result.digest[:16]}[/]"
    )
    for target in (out and out / "report.html", page):
        if target is not None:
            from rigd.report.page import write_page

            output.say(f"report: {write_page(data, target, wrong)}")
    return done.result.exit_code


@contextlib.contextmanager
def _journal(out: Path | None, wanted: bool) -> Iterator[Path | None]:
    """Where the journal goes; ``UsageError`` when there is one already. A rehearsal that fails leaves none behind.

    A page needs one for its curves: without ``out`` it is kept until the page's data are read.
    """
    if out is None:
        with tempfile.TemporaryDirectory(prefix="rigd-dry-") if wanted else contextlib.nullcontext() as folder:
            yield Path(folder) / "run.sqlite" if folder else None
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
