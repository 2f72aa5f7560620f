"""What a replay and a what-if found, for people and as JSON."""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from rigd.console.output import Output
from rigd.console.watch_view import clock_words
from rigd.runtime.replay import Difference, Replayed
from rigd.runtime.what_if import Change, WhatIf

if TYPE_CHECKING:
    from rigd.adapters.journal_reader import ScanRecord

PROGRESS_SCANS = 2_000


def replay_facts(run: str, found: Replayed, wall_s: float) -> dict[str, object]:
    """The document of ``rigd replay --json``."""
    return {
        "run": run,
        "same": found.same,
        "scans": found.scans,
        "samples": found.samples,
        "orders": found.orders,
        "events": found.events,
        "duration_s": found.end_ns / 1e9,
        "different_scans": found.different,
        "first": found.first and _difference_facts(found.first),
        "gap": found.gap,
        "notes": list(found.notes),
        "outcome": found.recorded.meta.get("outcome", ""),
        "wall_s": wall_s,
        "samples_per_s": found.samples / max(wall_s, 1e-9),
    }


def _difference_facts(one: Difference) -> dict[str, object]:
    words = {"expected": one.expected, "actual": one.actual}
    return {"scan": one.scan, "t_s": one.t_ns / 1e9, "what": one.what, **words}


def replay_view(run: str, found: Replayed, wall_s: float) -> RenderableType:
    """The verdict, and the first difference side by side."""
    parts: list[RenderableType] = []
    if found.first is not None:
        parts.append(Text(f"{run}: decided differently in {found.different} of {found.scans} scans", style="bold red"))
        parts.append(_side_by_side(found.first))
    elif found.gap:
        parts.append(Text(f"{run}: cannot be compared to its end", style="bold red"))
    else:
        parts.append(Text(f"{run}: no divergence", style="bold green"))
    if found.gap:
        parts.append(Text(found.gap, style="red"))
    counts = f"{found.scans} scans, {found.samples} samples, {found.orders} orders, {found.events} events"
    rate = f"{found.samples / max(wall_s, 1e-9):.0f} samples/s"
    parts.append(Text(f"{counts}, {clock_words(found.end_ns / 1e9)} of process time in {wall_s:.1f} s ({rate})", "dim"))
    parts += [Text(f"note: {note}", style="yellow") for note in found.notes]
    return Group(*parts)


def _side_by_side(one: Difference) -> Table:
    when = f"first difference: {one.what} in scan {one.scan}, {clock_words(one.t_ns / 1e9)} ({one.t_ns / 1e9:.3f} s)"
    table = Table(title=when, title_justify="left", expand=True)
    table.add_column("recorded", ratio=1, style="green")
    table.add_column("decided now", ratio=1, style="red")
    table.add_row(Text(one.expected), Text(one.actual))
    return table


def what_if_facts(run: str, rig: str, found: WhatIf) -> dict[str, object]:
    """The document of ``rigd replay --with --json``."""
    return {
        "run": run,
        "with": rig,
        "same": not found.changes and found.parted_ns is None,
        "parted_s": None if found.parted_ns is None else found.parted_ns / 1e9,
        "duration_s": found.end_ns / 1e9,
        "changes": [_change_facts(change) for change in found.changes],
        "notes": list(found.notes),
    }


def _change_facts(one: Change) -> dict[str, object]:
    return {
        "kind": one.kind.value,
        "subject": one.subject,
        "detail": one.detail,
        "recorded_s": None if one.recorded_ns is None else one.recorded_ns / 1e9,
        "would_s": None if one.would_ns is None else one.would_ns / 1e9,
        "earlier_s": one.earlier_s,
        "text": one.text,
    }


def what_if_view(run: str, rig: str, found: WhatIf) -> RenderableType:
    """What would have been different, in the order of time."""
    if not found.changes and found.parted_ns is None:
        return Group(
            Text(f"{run} with {rig}: nothing would have been different", style="bold green"), *_notes(found.notes)
        )
    table = Table(title=f"{run} with {rig}", title_justify="left", expand=True)
    for name, share in (("what", 4), ("recorded", 2), ("would have been", 2), ("difference", 3), ("words", 8)):
        table.add_column(name, ratio=share)
    for change in found.changes:
        style = "bold red" if change.kind == "trip" else ""
        what = " ".join(part for part in (change.kind.value, change.subject, change.detail) if part)
        times = (_time(change.recorded_ns), _time(change.would_ns))
        table.add_row(Text(what, style), *times, shift_words(change), Text(change.text))
    parts: list[RenderableType] = [table]
    if found.parted_ns is not None:
        parts.append(Text(_PARTED.format(clock_words(found.parted_ns / 1e9)), style="dim"))
    return Group(*parts, *_notes(found.notes))


_PARTED = (
    "The orders part at {}. Up to there this is exact; after it the record shows a rig that did not hear the other "
    "orders, so only measured values against limits are told."
)


def _notes(notes: tuple[str, ...]) -> list[Text]:
    return [Text(f"note: {note}", style="yellow") for note in notes]


def _time(t_ns: int | None) -> str:
    return "never" if t_ns is None else clock_words(t_ns / 1e9)


def shift_words(change: Change) -> str:
    """By how much, in words: ``4.2 min earlier``."""
    earlier_s = change.earlier_s
    if earlier_s is None:
        return "only with the other rig" if change.recorded_ns is None else "not with the other rig"
    amount = abs(earlier_s)
    words = f"{amount / 60:.1f} min" if amount >= 90 else f"{amount:.1f} s" if amount >= 0.1 else f"{amount:.3f} s"
    return f"{words} {'earlier' if earlier_s > 0 else 'later'}"


@contextlib.contextmanager
def show_replay_progress(output: Output, folder: Path) -> Iterator[Callable[[ScanRecord], None] | None]:
    """A bar while a long journal is decided again, on a terminal only."""
    if not output.errors.is_terminal:
        yield None
        return
    from rich.progress import Progress

    from rigd.adapters.journal_reader import JournalReader

    with JournalReader(folder) as journal:
        last, _, _ = journal.span()
    with Progress(console=output.errors, transient=True) as progress:
        task = progress.add_task("deciding again", total=last)

        def watch(record: ScanRecord) -> None:
            if record.number % PROGRESS_SCANS == 0:
                progress.update(task, completed=record.number)

        yield watch
