"""The replay shell: the same inputs into the same core, and every order and event compared with the record.

House rules. The record is never changed. Nothing is left out of the comparison. A scan that was recorded before the
daemon died, but whose decision was lost with it, is said and not counted as a difference; a gap in the record ends the
comparison, because nothing after it can be known.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from itertools import zip_longest
from pathlib import Path

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_reader import JournalReader, ScanRecord
from rigd.logic import scan as core
from rigd.logic.program import Program
from rigd.model.errors import JournalError
from rigd.model.events import Event
from rigd.model.orders import Order
from rigd.runtime.recorded_run import Recorded, recorded_run

NOTHING = "nothing"


@dataclass(frozen=True, slots=True)
class Difference:
    """One order or event that is not as recorded; ``expected`` is what the journal holds, ``actual`` what was decided
    now, each in words."""

    scan: int
    t_ns: int
    what: str
    expected: str
    actual: str


@dataclass(slots=True)
class Replayed:
    """What a replay found. ``different`` counts the scans that were decided otherwise; ``first`` is the first of
    their differences. ``compared`` is false for the last scan of a run that died before its decision was recorded."""

    recorded: Recorded
    scans: int = 0
    samples: int = 0
    orders: int = 0
    events: int = 0
    end_ns: int = 0
    different: int = 0
    first: Difference | None = None
    notes: list[str] = field(default_factory=list)
    gap: str = ""

    @property
    def same(self) -> bool:
        """True when the whole record was decided again exactly as it was."""
        return self.first is None and not self.gap


Watch = Callable[[ScanRecord], None]


def replay(run: Path, watch: Watch | None = None) -> Replayed:
    """Decide a run again from its folder or journal. ``watch`` is called with each scan. Raises ``JournalError``."""
    with JournalReader(run) as journal:
        recorded = recorded_run(journal)
        result = Replayed(recorded, notes=list(recorded.notes))
        last, _, _ = journal.span()
        if not last:
            raise JournalError(f"{journal.path} holds no scan: the run ended before it began")
        died = "outcome" not in recorded.meta
        _compare(result, recorded.program, journal.scans(), last if died else 0, watch)
    if died:
        result.notes.append(
            "the journal was never closed: the run goes on, or the daemon died; compared as far as the record goes"
        )
    if lost := recorded.meta.get("lost_records"):
        result.notes.append(f"{lost} records were lost while the disk was full")
    return result


def _compare(result: Replayed, program: Program, records: Iterable[ScanRecord], torn: int, watch: Watch | None) -> None:
    """Decide all scans; ``torn`` is the number of the scan whose decision may be missing (0: none)."""
    state: core.CoreState | None = None
    number = 0
    for record in records:
        if record.number != number + 1:
            result.gap = f"the journal lacks scans {number + 1} to {record.number - 1}: no comparison from there on"
            return
        number = record.number
        if state is None:
            state = core.initial(program, record.now_ns)
        step = core.scan(program, state, record.intake, record.now_ns)
        state = step.state
        result.samples += len(record.intake.samples)
        if step.orders or step.events or record.orders or record.events:
            _judge(result, record, step, number == torn)
        if watch is not None:
            watch(record)
        result.scans, result.end_ns = number, record.now_ns


def _judge(result: Replayed, record: ScanRecord, step: core.Step, torn: bool) -> None:
    if torn and not record.orders and not record.events:
        result.notes.append(f"the decision of the last scan ({record.number}) was not recorded")
        return
    result.orders += len(record.orders)
    result.events += len(record.events)
    if (step.orders, step.events) == (record.orders, record.events):
        return
    found = difference(record, step.orders, step.events)
    if found is not None:
        result.different += 1
        result.first = result.first or found


def difference(record: ScanRecord, orders: Sequence[Order], events: Sequence[Event]) -> Difference | None:
    """The first order, else the first event, that differs from the record of a scan (in the form that a journal can
    hold: there, no number is equal to itself as a matter of course)."""
    for expected, actual in zip_longest(record.orders, orders):
        if _row(expected) != _row(actual):
            return Difference(record.number, record.now_ns, "order", order_words(expected), order_words(actual))
    for told, now in zip_longest(record.events, events):
        if _row(told) != _row(now):
            return Difference(record.number, record.now_ns, "event", event_words(told), event_words(now))
    return None


def _row(thing: Order | Event | None) -> object:
    if thing is None:
        return None
    return schema.order_row(0, thing) if isinstance(thing, Order) else schema.event_row(0, thing)


def order_words(order: Order | None) -> str:
    """An order as one line."""
    if order is None:
        return NOTHING
    head = f"order {order.number}: {order.unit} {order.action.value} {order.value:g}"
    return f"{head} ({order.authority.name.lower()}, {order.source})"


def event_words(event: Event | None) -> str:
    """An event as one line."""
    if event is None:
        return NOTHING
    fields = ", ".join(f"{key}={value}" for key, value in event.fields.items())
    return f"{event.kind.value} {event.subject}: {event.text} [{fields}]"
