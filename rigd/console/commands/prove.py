"""``rigd prove``: every fault of the simulator in every phase of a recipe, judged by the true plant."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.output import Output, json_option

if TYPE_CHECKING:
    from collections.abc import Sequence

    from rigd.prove.branch import Job
    from rigd.prove.judge import Night

COUNT = click.IntRange(min=1)
HOURS = click.FloatRange(min=0.0, max=1e5)
PAGE = click.Path(path_type=Path, dir_okay=False)


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("recipe", type=click.Path(path_type=Path))
@click.option("--seeds", type=COUNT, default=1, show_default=True, help="How many seeds.")
@click.option("--only", "kinds", multiple=True, metavar="KIND", help="Only this kind of fault; may be repeated.")
@click.option(
    "--targets",
    type=click.IntRange(min=0),
    default=1,
    show_default=True,
    help="Parts that each kind is tried on; 0: no faults.",
)
@click.option(
    "--healthy-hours",
    type=HOURS,
    default=0.0,
    metavar="HOURS",
    help="Rehearse at least so many hours without a fault, of further seeds; a trip in them counts against the proof.",
)
@click.option("--quick", is_flag=True, help="The largest magnitude of each kind only.")
@click.option("--workers", type=COUNT, default=None, help="Processes; one for each core if not given.")
@click.option("--out", type=PAGE, default=Path("proof.html"), show_default=True, help="Where the page goes.")
@json_option
@click.pass_obj
def prove(
    output: Output, rig: Path, recipe: Path, seeds: int, kinds: tuple[str, ...], targets: int, quick: bool,
    healthy_hours: float, workers: int | None, out: Path,
) -> int:  # fmt: skip
    """Inject every fault in every phase of RECIPE and show which stop, how fast, how close to a rating.

    It proves the software against the simulator and nothing about a real rig. Exit 0: all held. 1: some were missed.
    2: a file is wrong.
    """
    from rigd.config import load_pair
    from rigd.console.proof_view import table, told
    from rigd.prove.proof import Settings, faults_of, jobs_of
    from rigd.report.proof_page import write_proof_page

    pair = load_pair(rig, recipe)
    assert pair.recipe is not None
    settings = Settings(tuple(range(1, seeds + 1)), workers or 0, kinds, quick, targets, healthy_hours)
    _known(kinds)
    faults = faults_of(pair.rig, settings)
    jobs, healthy, moments = jobs_of(rig, recipe, faults, settings)
    output.say(f"{len(faults)} faults in {len(moments)} phases, {len(faults) * len(moments) * seeds} nights")
    nights = _carried_out(output, jobs, workers or 0, len(faults) * len(moments) * seeds)
    facts = told(pair.rig.title, pair.recipe.title, [moment.phase for moment in moments], nights, healthy)
    output.document(facts)
    if facts["missed"] or facts["unseen"] or facts["told"]:
        output.say(table(facts))
    output.say(f"[bold]{facts['words']}[/]")
    output.say(facts["danger_words"])
    output.say(f"{facts['bound_words']} {facts['healthy_words']}")
    output.say(f"report: {write_proof_page(out, facts)}")
    return 0 if facts["all_held"] else 1


def _known(kinds: tuple[str, ...]) -> None:
    from rigd.adapters.plugins import plant_maker
    from rigd.config.findings import nearest

    names = [kind.kind for kind in plant_maker().fault_kinds()]
    for name in kinds:
        if name not in names:
            raise click.UsageError(f"--only: there is no fault kind {name!r}{nearest(name, names)}")


def _carried_out(output: Output, jobs: Sequence[Job], workers: int, total: int) -> list[Night]:
    from rigd.prove.proof import nights_of

    if not output.errors.is_terminal:
        return _told_as_they_come(output, jobs, workers)
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("nights"), BarColumn(), MofNCompleteColumn(), TextColumn("left"), TimeRemainingColumn())
    found: list[Night] = []
    with Progress(*columns, console=output.errors, transient=True) as bar:
        task = bar.add_task("nights", total=total)
        for night in nights_of(jobs, workers):
            found.append(night)
            bar.advance(task)
    return found


def _told_as_they_come(output: Output, jobs: Sequence[Job], workers: int) -> list[Night]:
    """For a log file: each missed night at once, for a proof can take an hour."""
    from rich.markup import escape

    from rigd.prove.judge import MISSED
    from rigd.prove.proof import nights_of

    found: list[Night] = []
    for night in nights_of(jobs, workers):
        found.append(night)
        if night.verdict == MISSED:
            where = f"{night.kind} {night.magnitude:g} on {night.target} in {night.phase}"
            output.say(f"missed after {len(found)} nights: {where}: {escape(night.why)}")
    return found
