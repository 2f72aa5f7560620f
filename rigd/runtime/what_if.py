"""What-if: a recorded run decided again with another rig file, and what would have been different.

How far this can be trusted. The inputs are those of the run as it was: they do not answer to the other decisions. Until
the first order differs (``parted_ns``) everything is exact. After it, only comparisons of measured values with limits
are told (would 6 bar have tripped, and when?), not what follows from commands that the recorded rig never got.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from pathlib import Path

from rigd.adapters.journal_reader import JournalReader, ScanRecord
from rigd.config.load import load_rig
from rigd.logic import scan as core
from rigd.logic.program import Program, compile_program
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.protection import ConditionKind
from rigd.model.rig import RigDefinition
from rigd.runtime.calibrated import calibrated_rig, corrections_of
from rigd.runtime.recorded_run import recorded_run

MEASURED = frozenset({ConditionKind.HIGH, ConditionKind.LOW, ConditionKind.RATE, ConditionKind.BAD})
"""Conditions that look at measured values only."""
TOLD = (EventKind.TRIP, EventKind.ALARM, EventKind.STOP, EventKind.RUN_STATE, EventKind.PHASE, EventKind.POINT)


@dataclass(frozen=True, slots=True)
class Change:
    """Something that would have happened at another time, or only in one of the two (``None``: never). ``text`` is the
    sentence of whichever happened, ``value`` and ``limit`` those of the other rig's trip where there are any."""

    kind: EventKind
    subject: str
    detail: str
    recorded_ns: int | None
    would_ns: int | None
    text: str

    @property
    def earlier_s(self) -> float | None:
        """How much earlier it would have happened [s], negative for later; ``None`` when it happened in one only."""
        if self.recorded_ns is None or self.would_ns is None:
            return None
        return (self.recorded_ns - self.would_ns) / 1e9


@dataclass(frozen=True, slots=True)
class WhatIf:
    """``changes`` in the order of time; ``parted_ns`` when the first order differed, ``None`` when none did."""

    changes: tuple[Change, ...]
    parted_ns: int | None
    end_ns: int
    scans: int
    notes: tuple[str, ...]


def what_if(run: Path, rig_path: Path) -> WhatIf:
    """Decide a run again with the rig in ``rig_path``. Raises ``ConfigError`` for a bad file, ``JournalError`` for
    a rig that cannot have had these data and for a journal that cannot be read."""
    with JournalReader(run) as journal:
        if not journal.span()[0]:
            raise JournalError(f"{journal.path} holds no scan: the run ended before it began")
        recorded = recorded_run(journal)
        corrected = corrections_of(recorded.meta.get("calibrations", ""))
        was, rig = recorded.program, calibrated_rig(load_rig(rig_path), corrected)
        notes = (*recorded.notes, *_fits(was.rig, rig))
        # the recipe as it was run: whether it passes the checks of the other rig is a matter of the next run
        return _decide_both(journal.scans(), was, compile_program(rig, was.recipe, was.options), notes)


def _fits(was: RigDefinition, other: RigDefinition) -> Iterator[str]:
    """Notes about harmless differences; ``JournalError`` when the data say nothing about the other rig."""
    for what, had, wanted in (
        ("unit", _units(was), _units(other)),
        ("tag", {tag.id for tag in was.tags}, {tag.id for tag in other.tags if tag.device}),
    ):
        if missing := sorted(wanted - had):
            raise JournalError(
                f"the other rig has the {what} {missing[0]!r}, about which this run holds nothing; "
                "--with takes a rig file that differs in limits, delays, interlocks or alarms"
            )
    if gone := sorted(_units(was) - _units(other)):
        raise JournalError(f"the other rig has no {gone[0]!r}, which this run moved: it is another rig")
    if unused := sorted({tag.id for tag in was.tags} - {tag.id for tag in other.tags}):
        yield f"left out, because the other rig does not have them: {', '.join(unused)}"


def _units(rig: RigDefinition) -> set[str]:
    return {part.id for parts in (rig.pumps, rig.valves, rig.chillers) for part in parts}


def _decide_both(records: Iterable[ScanRecord], program: Program, other: Program, notes: tuple[str, ...]) -> WhatIf:
    """The recorded decisions are not decided again: they are what happened."""
    state: core.CoreState | None = None
    was, would = _Diary(), _Diary()
    parted_ns: int | None = None
    tags, devices = frozenset(other.tags), frozenset(other.devices)
    scans = end_ns = 0
    for record in records:
        state = state or core.initial(other, record.now_ns)
        step = core.scan(other, state, _known(record.intake, tags, devices), record.now_ns)
        state = step.state
        was.write(record.events)
        would.write(step.events)
        if parted_ns is None and _commands(step.orders) != _commands(record.orders):
            parted_ns = record.now_ns
        scans, end_ns = scans + 1, record.now_ns
    measured = _measured(program) | _measured(other)
    changes = [change for change in _changes(was, would) if _holds(change, parted_ns, measured)]
    changes.sort(key=_time_ns)
    return WhatIf(tuple(changes), parted_ns, end_ns, scans, notes)


def _known(intake: Intake, tags: frozenset[str], devices: frozenset[str]) -> Intake:
    """An intake without what the other rig does not have."""
    samples = tuple(sample for sample in intake.samples if sample.tag in tags)
    links = tuple(status for status in intake.links if status.device in devices)
    return replace(intake, samples=samples, links=links)


def _commands(orders: Iterable[object]) -> list[tuple[object, ...]]:
    return [(getattr(one, "unit", ""), getattr(one, "action", ""), getattr(one, "value", 0.0)) for one in orders]


class _Diary:
    """What happened, by kind, subject and detail, each with its times in order."""

    def __init__(self) -> None:
        self.entries: dict[tuple[EventKind, str, str], list[Event]] = {}

    def write(self, events: Iterable[Event]) -> None:
        for event in events:
            if event.kind in TOLD:
                self.entries.setdefault((event.kind, event.subject, _detail(event)), []).append(event)


def _detail(event: Event) -> str:
    """What tells two events of one kind and subject apart."""
    keys = {EventKind.ALARM: "state", EventKind.POINT: "status", EventKind.PHASE: "point"}
    return str(event.fields.get(keys.get(event.kind, ""), ""))


def _changes(was: _Diary, would: _Diary) -> Iterator[Change]:
    for key in [*was.entries, *(key for key in would.entries if key not in was.entries)]:
        before, after = was.entries.get(key, []), would.entries.get(key, [])
        for number in range(max(len(before), len(after))):
            old = before[number] if number < len(before) else None
            new = after[number] if number < len(after) else None
            one = new or old
            assert one is not None
            if old is None or new is None or old.t_ns != new.t_ns:
                yield Change(*key, old.t_ns if old else None, new.t_ns if new else None, one.text)


def _time_ns(change: Change) -> int:
    return min(t_ns for t_ns in (change.recorded_ns, change.would_ns) if t_ns is not None)


def _measured(program: Program) -> frozenset[str]:
    """Interlocks and alarms that look at measured values only."""
    causes: Mapping[str, tuple[ConditionKind, ...]] = {
        **{one.id: tuple(cause.kind for cause in one.causes) for one in program.interlocks},
        **{one.id: (one.condition.kind,) for one in program.alarms},
    }
    return frozenset(name for name, kinds in causes.items() if MEASURED.issuperset(kinds))


def _holds(change: Change, parted_ns: int | None, measured: frozenset[str]) -> bool:
    """True for what can be said: all until the two part, then only what measured values and limits say."""
    if parted_ns is None or _time_ns(change) <= parted_ns:
        return True
    return change.kind in (EventKind.TRIP, EventKind.ALARM) and change.subject in measured
