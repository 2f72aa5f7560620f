"""``rigd replay``: decide a run again, play it back, or ask what another rig file would have done."""

from __future__ import annotations

import time
from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import LAST, find_run
from rigd.model.units import UnitError, parse_quantity


@click.command()
@click.argument("run", default=LAST)
@click.option(
    "--with", "other", type=click.Path(path_type=Path), help="What if the rig had been this: other limits, delays."
)
@click.option("--watch", is_flag=True, help="Play the run back on the terminal.")
@click.option("--from", "start", default="0 s", metavar="TIME", help="Where the playback begins, as 90 min.")
@click.option(
    "--speed", type=click.FloatRange(min=0, min_open=True), default=10.0, show_default=True,
    help="Process seconds per second of the playback.",
)  # fmt: skip
@json_option
@click.pass_obj
def replay(output: Output, run: str, other: Path | None, watch: bool, start: str, speed: float) -> int:
    """Decide RUN (its folder, its name, or the last one) again from its journal, and compare every order and event.

    Exit 0: decided exactly as recorded (with --with: nothing would have been different). 1: not. 2: a file is wrong.
    """
    if watch and other is not None:
        raise click.UsageError("--watch shows what was recorded; leave --with out")
    folder = find_run(run)
    if watch:
        from rigd.console.replay_watch import watch_run

        watch_run(output, folder, _seconds(start), speed)
        return 0
    return _again(output, folder) if other is None else _what_if(output, folder, other)


def _again(output: Output, folder: Path) -> int:
    from rigd.console.replay_view import replay_facts, replay_view, show_replay_progress
    from rigd.runtime.replay import replay as decide_again

    began = time.monotonic()
    with show_replay_progress(output, folder) as watch:
        found = decide_again(folder, watch)
    wall_s = time.monotonic() - began
    output.document(replay_facts(folder.name, found, wall_s))
    output.say(replay_view(folder.name, found, wall_s))
    return 0 if found.same else 1


def _what_if(output: Output, folder: Path, other: Path) -> int:
    from rigd.console.replay_view import what_if_facts, what_if_view
    from rigd.runtime.what_if import what_if

    found = what_if(folder, other)
    output.document(what_if_facts(folder.name, str(other), found))
    output.say(what_if_view(folder.name, str(other), found))
    return 1 if found.changes or found.parted_ns is not None else 0


def _seconds(text: str) -> float:
    try:
        return parse_quantity(text, "time")
    except UnitError as error:
        raise click.UsageError(f"--from: {error}") from error
