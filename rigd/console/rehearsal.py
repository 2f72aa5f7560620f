"""A dry run as data for the summary, the report and ``--json``."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np

from rigd.app import DryRun
from rigd.config.load import load_pair
from rigd.console.output import Output
from rigd.console.watch_view import left_words
from rigd.logic import scan
from rigd.logic.planning import plan
from rigd.logic.program import compile_program
from rigd.report.collect import phase_spans, read_run
from rigd.report.data import RunData, Trace
from rigd.report.facts import alarm_facts, point_facts, trip_facts
from rigd.report.points import point_rows

PATIENCE = 3.0
"""A rehearsal that takes this many times its plan, and an hour, waits for somebody who is not there: it is ended."""

PROGRESS_AFTER_S = 1.0
"""Wall time after which a rehearsal shows how far it is."""

Watch = Callable[[int, scan.CoreState], None]


def planned_s(rig: Path, recipe: Path) -> float:
    """How long the recipe takes on paper [s of process time]. Raises ``ConfigError``."""
    pair = load_pair(rig, recipe)
    assert pair.recipe is not None
    return plan(compile_program(pair.rig, pair.recipe)).duration_s


def longest_ns(expected_s: float) -> int:
    """When to give up on a rehearsal [ns of process time] that was planned to take so long."""
    return int((PATIENCE * expected_s + 3600.0) * 1e9)


def rehearsed(done: DryRun, journal: Path | None) -> RunData:
    """The run as the report sees it: from its journal when one was kept, else from its events (no curves)."""
    result, program = done.result, done.program
    if journal is not None:
        return read_run(journal.parent, program.rig, program.recipe)
    end_s = result.end_ns / 1e9
    events = tuple(result.events)
    traces = signal_trace(done)
    return RunData(
        id="dry run",
        folder="",
        title=program.rig.title,
        recipe_title=program.recipe.title,
        simulated=True,
        pace=1.0,
        outcome=result.outcome,
        outcome_text=result.text,
        started_utc="",
        ended_utc="",
        duration_s=end_s,
        traces=traces,
        phases=phase_spans(events, end_s),
        points=point_rows(events, traces, program.rig, program.recipe),
        events=events,
        used_mL=used_mL(done),
        rig=program.rig,
        recipe=program.recipe,
    )


def signal_trace(done: DryRun) -> dict[str, Trace]:
    """The signal by which points were judged, so that their conversions have an uncertainty without a journal."""
    tag = next((tag for tag in done.program.rig.tags if tag.id == done.program.recipe.settle.signal), None)
    if tag is None or not done.result.signal:
        return {}
    times, values = np.array(done.result.signal, dtype=float).T
    return {tag.id: Trace(tag.id, tag.title, tag.measures, tag.unit, times / 1e9, values)}


def used_mL(done: DryRun) -> dict[str, float]:
    """mL of each liquid as the core's own ledger has it at the end."""
    shown = scan.snapshot(done.program, done.result.state, done.result.end_ns)
    used = shown.get("used_mL")
    return {str(name): float(volume) for name, volume in used.items()} if isinstance(used, dict) else {}


def vessels_mL(done: DryRun) -> dict[str, float]:
    """mL in each vessel at the end, counted by the core from the pumps' own counters."""
    return dict(done.result.state.protect.ledger.vessels)


def dry_facts(done: DryRun, data: RunData, seed: int, wall_s: float) -> dict[str, object]:
    """The keys that ``dry-run --json`` promises."""
    result = done.result
    return {
        "outcome": result.outcome,
        "text": result.text,
        "simulated": True,
        "seed": seed or done.program.rig.simulation.seed,
        "digest": result.digest,
        "duration_s": result.end_ns / 1e9,
        "wall_s": wall_s,
        "points": [point_facts(point) for point in data.points],
        "peak": dict(result.peak),
        "used_mL": used_mL(done),
        "trips": trip_facts(result.events),
        "alarms": alarm_facts(result.events),
        "scans": result.scans,
    }


@contextlib.contextmanager
def show_progress(output: Output, expected_s: float) -> Iterator[Watch | None]:
    """A bar against the planned time once the rehearsal has taken a second, on a terminal only."""
    if not output.errors.is_terminal:
        yield None
        return
    from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("rehearsing"), BarColumn(), TextColumn("{task.fields[at]}"), TimeRemainingColumn())
    bar = Progress(*columns, console=output.errors, transient=True)
    task = bar.add_task("", total=expected_s, at="")
    began_s = time.monotonic()

    def watch(now_ns: int, state: scan.CoreState) -> None:
        if now_ns // 1_000_000_000 % 30 == 0 and time.monotonic() - began_s > PROGRESS_AFTER_S:
            bar.start()
            now_s = now_ns / 1e9
            bar.update(task, completed=min(now_s, expected_s), at=f"{left_words(now_s)} of process time{_phase(state)}")

    try:
        yield watch
    finally:
        bar.stop()


def _phase(state: Any) -> str:
    phase = getattr(getattr(state, "conduct", None), "phase", None)
    return f", {phase}" if isinstance(phase, str) else ""
