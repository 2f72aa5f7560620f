"""How fast a run really answered: how old samples were when judged, and each trip from its sample to the stop."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from rigd.model.events import Event, EventKind
from rigd.report.data import RunData

QUANTILES = (0.5, 0.99, 1.0)


@dataclass(frozen=True, slots=True)
class AgeRow:
    """Samples of one tag: how many, and the age [s] that half, 99 % and all of them did not exceed."""

    tag: str
    samples: int
    median_s: float
    p99_s: float
    worst_s: float


@dataclass(frozen=True, slots=True)
class TripRow:
    """A trip: from its sample to the decision, to the last pump's answer, and until all was read to stand [s]; what was
    planned and allowed for the second, where that is known."""

    interlock: str
    t_s: float
    decided_s: float
    answered_s: float
    stands_s: float | None
    planned_s: float | None
    allowed_s: float | None

    @property
    def late(self) -> bool:
        """True when the budget was broken."""
        return self.allowed_s is not None and self.answered_s > self.allowed_s


def age_rows(run: RunData) -> tuple[AgeRow, ...]:
    """Of the tags that an interlock looks at (all without a rig), the slowest first. None for a rehearsal in virtual
    time, where nothing takes time."""
    looked_at = {cause.tag for lock in run.rig.interlocks for cause in lock.causes} if run.rig else set(run.ages_ms)
    rows = [_age_row(tag, counts) for tag, counts in run.ages_ms.items() if tag in looked_at and counts]
    if not any(row.worst_s > 0 for row in rows):
        return ()
    return tuple(sorted(rows, key=lambda row: (-row.worst_s, row.tag)))


def _age_row(tag: str, counts: Mapping[int, int]) -> AgeRow:
    total, passed, found = sum(counts.values()), 0, []
    wanted = list(QUANTILES)
    for age_ms in sorted(counts):
        passed += counts[age_ms]
        while wanted and passed >= wanted[0] * total:
            found.append(age_ms / 1e3)
            wanted.pop(0)
    return AgeRow(tag, total, *found)


def trip_rows(run: RunData) -> tuple[TripRow, ...]:
    """Every trip that was timed."""
    events = [event for event in run.events if event.kind is EventKind.MEASUREMENT]
    timed = [event for event in events if event.subject.startswith("response ")]
    return tuple(_trip_row(event, events) for event in timed)


def _trip_row(event: Event, events: list[Event]) -> TripRow:
    name = event.subject.removeprefix("response ")
    stands = (e for e in events if e.subject == f"confirmation {name}" and e.t_ns >= event.t_ns)
    last = next(stands, None)
    fields = event.fields
    return TripRow(
        name,
        event.t_ns / 1e9,
        float(fields["decided_s"]),
        float(fields["value"]),
        None if last is None else float(last.fields["value"]),
        float(fields["planned_s"]) if "planned_s" in fields else None,
        float(fields["allowed_s"]) if "allowed_s" in fields else None,
    )
