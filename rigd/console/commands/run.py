"""``rigd run``: run a recipe on a rig."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import RUNS, find_run
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition

PROGRESS = (sys.executable, "-m", "rigd.console.progress", "{folder}")


def report_command(as_json: bool) -> tuple[str, ...]:
    """What the guard runs when the run is over."""
    return (sys.executable, "-m", "rigd", "report", "{folder}", *(["--json"] if as_json else []))


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("recipe", type=click.Path(path_type=Path))
@click.option("--pace", type=click.FloatRange(min=0, min_open=True), default=1.0, show_default=True,
              help="Process seconds per second; other than 1 only with a simulated rig.")  # fmt: skip
@click.option("--sign", "signer", default="", metavar="NAME", help="Sign every checklist item in this name.")
@click.option(
    "--runs", type=click.Path(path_type=Path), default=RUNS, show_default=True, help="Where the run folder goes."
)
@click.option(
    "--resume", "earlier", default="", metavar="RUN", help="Leave out what this earlier, stopped run collected."
)
@click.option("--unattended", is_flag=True, help="Nobody will be there: needs a permit in the recipe; no bypass.")
@json_option
@click.pass_obj
def run(
    output: Output, rig: Path, recipe: Path, pace: float, signer: str, runs: Path, earlier: str, unattended: bool
) -> None:
    """Run RECIPE on RIG: prime, condition, test for leaks, sweep, flush, park; then the report.

    Ctrl-C asks for an orderly stop (flush, then rest); a second one stops everything at once.
    """
    from rigd.adapters.places import SIMULATED
    from rigd.app import RunSettings, start_run
    from rigd.config.load import load_pair

    pair = load_pair(rig, recipe)
    assert pair.recipe is not None
    before = find_run(earlier, runs) if earlier else None
    collected = collected_points(before, pair.rig, pair.recipe) if before else ()
    simulated = all(link.port == SIMULATED for link in pair.rig.links)
    if not simulated and not signer:
        signer = sign(output, pair.rig, pair.recipe)
    say_overdue(output, rig, pair.rig)
    if unattended:
        say_waived(output, rig, pair.rig, pair.recipe, pace)
    start_run(rig, recipe, RunSettings(
        pace=pace, signer=signer, runs=runs, collected=collected, earlier=before.resolve().name if before else "",
        unattended=unattended,
        progress=PROGRESS, after=report_command(output.json),
    ))  # fmt: skip


def say_overdue(output: Output, path: Path, rig: RigDefinition) -> None:
    """Tell which calibrations are overdue; they stay in force."""
    from rigd.runtime.calibrated import calibrations_of

    for one in calibrations_of(path, rig):
        if one["overdue"]:
            due = str(one["due_utc"])[:10]
            output.errors.print(f"[yellow]overdue since {due}[/]: {one['kind']} of {one['subject']}; it stays in force")


def say_waived(output: Output, path: Path, rig: RigDefinition, recipe: Recipe, pace: float) -> None:
    """Tell what a real rig would be refused for, though a simulated one is not."""
    from rich.markup import escape

    from rigd.runtime.arming import arming_of

    for one in arming_of(path, rig, recipe, pace).requirements:
        if one.waived and not one.met:
            output.errors.print(f"[yellow]{one.title}[/]: {escape(one.found)} ({one.waived})")


def sign(output: Output, rig: RigDefinition, recipe: Recipe) -> str:
    """Ask for each checklist item at the terminal; returns the name given. ``UsageError`` without a terminal."""
    if not (sys.stdin.isatty() and sys.stderr.isatty()):
        raise click.UsageError(
            "this rig has real ports, so a person signs the checklist: run it at a terminal, or give --sign NAME"
        )
    output.errors.print(f"[bold]{rig.title}[/]\n{recipe.title}\n")
    name: str = click.prompt("Your name", err=True).strip()
    for number, item in enumerate(recipe.checklist, 1):
        output.errors.print(f"{number} of {len(recipe.checklist)}  [bold]{item.text}[/]")
        if not click.confirm("Is this so?", err=True):
            raise click.UsageError(f"checklist item {item.id!r} is not signed; nothing was started")
    if not click.confirm("Start? The pumps will move.", err=True):
        raise click.UsageError("nothing was started")
    return name


def collected_points(folder: Path, rig: RigDefinition, recipe: Recipe) -> tuple[str, ...]:
    """Ids of the points that an earlier run of the same recipe collected; ``UsageError`` when it was another one."""
    from rigd.adapters.journal_reader import JournalReader
    from rigd.model.events import EventKind

    with JournalReader(folder) as journal:
        meta, events = journal.meta, journal.events(EventKind.POINT)
    for kind, now in (("recipe", recipe.digest), ("rig", rig.digest)):
        if meta.get(f"{kind}_digest", now) != now:
            raise click.UsageError(
                f"{folder.name} was made with another {kind} file; resume only what is unchanged, or start a new run"
            )
    earlier = json_list(meta.get("collected", "[]"))
    new = [event.subject for event in events if event.fields.get("status") == "collected"]
    return tuple(dict.fromkeys([*earlier, *new]))


def json_list(text: str) -> list[str]:
    """A JSON list of texts, empty when it is none."""
    import json

    try:
        found = json.loads(text)
    except ValueError:
        return []
    return [str(item) for item in found] if isinstance(found, list) else []
