"""A recorded run that can be looked at at any time: decided again up to there, forwards or backwards.

Going back costs little because the core's states never change: one is kept every ``KEYFRAME_SCANS`` scans, and going to
a time decides from the one before it.
"""

from __future__ import annotations

from bisect import bisect_right
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from rigd.adapters.journal_reader import JournalReader, ScanRecord
from rigd.logic import scan as core
from rigd.model.events import Event, EventKind
from rigd.runtime.recorded_run import Recorded, recorded_run

KEYFRAME_SCANS = 500
EVENTS_KEPT = 20
CHAPTERS = (EventKind.PHASE, EventKind.TRIP, EventKind.STOP)
"""Events that a viewer jumps between."""


@dataclass(frozen=True, slots=True)
class Frame:
    """The run after one scan; ``snapshot`` as in ``rigd.ports.door.SNAPSHOT_KEYS`` except ``run``; the last events."""

    number: int
    now_ns: int
    snapshot: dict[str, object]
    events: tuple[Event, ...]


@dataclass(frozen=True, slots=True)
class _Keyframe:
    record: ScanRecord
    state: core.CoreState
    events: tuple[Event, ...]


class Film:
    """``at`` and ``step`` give frames; times are process time [ns]. Raises ``JournalError`` for a damaged record."""

    def __init__(self, journal: JournalReader) -> None:
        self._journal = journal
        self.recorded: Recorded = recorded_run(journal)
        self.last, self.start_ns, self.end_ns = journal.span()
        self.chapters_ns = tuple(sorted({event.t_ns for event in journal.events(*CHAPTERS)}))
        self._keyframes: list[_Keyframe] = []
        self._records: Iterator[ScanRecord] = iter(())
        self._coming: ScanRecord | None = None
        self._state: core.CoreState | None = None
        self._record: ScanRecord | None = None
        self._events: deque[Event] = deque(maxlen=EVENTS_KEPT)
        self._rewind()

    def at(self, t_ns: int) -> Frame | None:
        """The run as it was at a time: after the last scan at or before it. ``None`` for an empty journal."""
        if self._record is None or self._record.now_ns > t_ns:
            self._back_to(lambda frame: frame.record.now_ns <= t_ns)
        while self._coming is not None and (self._coming.now_ns <= t_ns or self._record is None):
            self._decide()
        return self._frame()

    def step(self, scans: int) -> Frame | None:
        """The run some scans further on, or further back."""
        wanted = max(1, (self._record.number if self._record else 0) + scans)
        if self._record is not None and self._record.number > wanted:
            self._back_to(lambda frame: frame.record.number <= wanted)
        while self._coming is not None and (self._coming.number <= wanted or self._record is None):
            self._decide()
        return self._frame()

    def _back_to(self, fits: Callable[[_Keyframe], bool]) -> None:
        """To the newest keyframe that fits, or to the beginning."""
        kept = bisect_right([not fits(frame) for frame in self._keyframes], False)
        if not kept:
            self._rewind()
            return
        key = self._keyframes[kept - 1]
        self._state, self._record = key.state, key.record
        self._events = deque(key.events, maxlen=EVENTS_KEPT)
        self._records = self._journal.scans(key.record.number)
        self._coming = next(self._records, None)

    def _rewind(self) -> None:
        self._state, self._record = None, None
        self._events.clear()
        self._records = self._journal.scans()
        self._coming = next(self._records, None)

    def _decide(self) -> None:
        record = self._coming
        assert record is not None
        program = self.recorded.program
        step = core.scan(program, self._state or core.initial(program, record.now_ns), record.intake, record.now_ns)
        self._state, self._record = step.state, record
        self._events.extend(step.events)
        self._coming = next(self._records, None)
        newest = self._keyframes[-1].record.number if self._keyframes else -KEYFRAME_SCANS
        if record.number - newest >= KEYFRAME_SCANS:
            self._keyframes.append(_Keyframe(record, step.state, tuple(self._events)))

    def _frame(self) -> Frame | None:
        if self._record is None or self._state is None:
            return None
        snapshot = core.snapshot(self.recorded.program, self._state, self._record.now_ns)
        snapshot["utc"] = self._record.utc
        return Frame(self._record.number, self._record.now_ns, snapshot, tuple(self._events))
