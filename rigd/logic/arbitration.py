"""From what is wanted to orders: what differs from what a unit was last told, and did not fail, is ordered.

House rules: the halves speak in turn, protect first; what protect demands, conduct cannot touch; an order has a source;
stops go first, then valves, baths, fillings, and deliveries last. A filling waits until its feed valve has arrived, a
delivery from rest until the outlet valve has: stop, switch, confirm, start.
A failed or refused order is repeated with growing pauses: ``TRIES`` times for the sequence, for ever for a stop. A
one-shot is never given twice under one ticket unless it failed. A device that restarted has been told nothing.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from enum import IntEnum
from typing import TYPE_CHECKING

from rigd.logic.demand import Demand
from rigd.model.devices import DeviceStatus, LinkState, PumpState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Action, Authority, Order, Outcome, Result
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

TRIES = 3
PAUSES_NS = (200_000_000, 500_000_000, 1_000_000_000, 2_000_000_000)
STANDS_NS = 1_000_000_000
"""A pump that was told to deliver and reports that it stands this long after it agreed has to be told again."""

NEVER_NS = 1 << 62


class Aspect(IntEnum):
    """What a unit can be told independently of the rest, in the order in which orders leave."""

    RATE = 0
    POSITION = 1
    SET_POINT = 2
    CIRCULATION = 3
    ONCE = 4


_ASPECT = {
    Action.DELIVER: Aspect.RATE,
    Action.STOP: Aspect.RATE,
    Action.MOVE: Aspect.POSITION,
    Action.SET_TEMPERATURE: Aspect.SET_POINT,
    Action.CIRCULATE: Aspect.CIRCULATION,
    Action.FILL: Aspect.ONCE,
    Action.SWAP: Aspect.ONCE,
}

Key = tuple[str, Aspect]
Fields = dict[str, str | float | int | bool]


@dataclass(frozen=True, slots=True)
class Told:
    """The last order of one aspect of a unit and what became of it. ``result`` is ``None`` until it is answered."""

    order: Order
    ticket: str = ""
    result: Result | None = None
    answered_ns: int = 0
    tries: int = 1
    retry_ns: int = NEVER_NS

    @property
    def stands(self) -> bool:
        """True unless the order is known to have come to nothing."""
        return self.result is None or self.result is Result.DONE


@dataclass(frozen=True, slots=True)
class Memory:
    """What every unit was told; ``number`` is that of the last order.

    ``settled`` is a demand that needed no more orders when it was last looked at, and still does not.
    """

    told: Mapping[Key, Told] = field(default_factory=dict)
    number: int = 0
    due_ns: int = NEVER_NS
    settled: Demand | None = None

    def last(self, unit: str, aspect: Aspect) -> Told | None:
        """The last order of this aspect that is not known to have failed."""
        told = self.told.get((unit, aspect))
        return told if told is not None and told.stands else None


@dataclass(frozen=True, slots=True)
class Wanted:
    """One order that a demand asks for."""

    unit: str
    action: Action
    value: float
    ticket: str = ""

    @property
    def key(self) -> Key:
        """The aspect that it sets."""
        return self.unit, _ASPECT[self.action]


def note(
    program: Program, memory: Memory, outcomes: Iterable[Outcome], links: Iterable[DeviceStatus], now_ns: int
) -> tuple[Memory, tuple[Event, ...]]:
    """Take in answers and link changes; an event for each answer that is not "done", up to ``TRIES`` per order."""
    told = dict(memory.told)
    events = [event for outcome in outcomes if (event := _answer(told, outcome, now_ns)) is not None]
    for status in links:
        unit = program.unit_of.get(status.device, "")
        for key in [key for key in told if key[0] == unit]:
            if status.power_cycled:
                del told[key]
            elif status.link is LinkState.ONLINE and not told[key].stands:
                told[key] = replace(told[key], retry_ns=now_ns)
    return Memory(told, memory.number, _due_ns(told)), tuple(events)


def _answer(told: dict[Key, Told], outcome: Outcome, now_ns: int) -> Event | None:
    key = (outcome.unit, _ASPECT[outcome.action])
    held = told.get(key)
    if held is not None and held.order.number == outcome.order_number:
        answered = replace(held, result=outcome.result, answered_ns=outcome.t_ns)
        if outcome.result is not Result.DONE:
            answered = _failing(answered, now_ns)
        told[key] = answered
    if outcome.result in (Result.DONE, Result.SUPERSEDED) or (held is not None and held.tries > TRIES):
        return None
    text = f"{outcome.unit} did not carry out '{outcome.action}': {outcome.detail or outcome.result}."
    fields: Fields = {"number": outcome.order_number, "result": str(outcome.result), "detail": outcome.detail}
    return Event(EventKind.ORDER, outcome.unit, now_ns, text, fields)


def _failing(told: Told, now_ns: int) -> Told:
    """When to try again; a refused one-shot and a sequence's exhausted order never."""
    patient = told.order.authority >= Authority.QUENCH or told.order.action is Action.STOP
    given_up = not patient and told.tries >= TRIES
    if given_up or (told.ticket and told.result is Result.REFUSED):
        return replace(told, retry_ns=NEVER_NS)
    pause_ns = PAUSES_NS[min(told.tries, len(PAUSES_NS)) - 1]
    return replace(told, retry_ns=now_ns + pause_ns)


def decide(
    program: Program,
    memory: Memory,
    demand: Demand,
    samples: Mapping[str, Sample],
    now_ns: int,
    again: frozenset[str] = frozenset(),
) -> tuple[Memory, tuple[Order, ...], tuple[Event, ...]]:
    """Orders for a demand. ``again`` names pumps whose stop is to be repeated although it was answered."""
    if demand == memory.settled and not again and not _any_stands(program, demand, samples):
        return memory, (), ()
    desk = _Desk(program, memory, samples, now_ns)
    for wanted in _wanted(program, demand):
        if desk.needs(wanted, repeat=wanted.action is Action.STOP and wanted.unit in again):
            desk.order(wanted, demand)
    return desk.result(demand), tuple(desk.orders), tuple(desk.events)


class _Desk:
    """Working space of one decision."""

    def __init__(self, program: Program, memory: Memory, samples: Mapping[str, Sample], now_ns: int) -> None:
        self._program = program
        self._before = memory
        self._memory = memory
        self._samples = samples
        self._now_ns = now_ns
        self._open = False
        self.orders: list[Order] = []
        self.events: list[Event] = []

    def needs(self, wanted: Wanted, *, repeat: bool) -> bool:
        """True when this has to be ordered now; remembers when it must be looked at again."""
        held = self._memory.told.get(wanted.key)
        if held is not None and wanted.action is Action.DELIVER:
            held = _check_running(self._program, held, self._samples, self._now_ns, self.events)
        if repeat or held is None or not _same(held, wanted):
            waits = _must_wait(self._program, self._memory, wanted, self._samples)
            self._open = self._open or waits
            return not waits
        self._open = self._open or not held.stands
        due = not held.stands and self._now_ns >= held.retry_ns
        return due and not _must_wait(self._program, self._memory, wanted, self._samples)

    def order(self, wanted: Wanted, demand: Demand) -> None:
        """Order it."""
        assert demand.source, "no order without a source"
        held, number = self._memory.told.get(wanted.key), self._memory.number + 1
        order = Order(number, wanted.unit, wanted.action, wanted.value, demand.authority, demand.source, self._now_ns)
        told = Told(order, wanted.ticket, tries=_tries(held, wanted, self._now_ns))
        self._memory = Memory({**self._memory.told, wanted.key: told}, number)
        self.orders.append(order)

    def result(self, demand: Demand) -> Memory:
        """The memory afterwards."""
        settled = None if self._open else demand
        if not self.orders and settled == self._before.settled:
            return self._before
        return Memory(self._memory.told, self._memory.number, _due_ns(self._memory.told), settled)


def _any_stands(program: Program, demand: Demand, samples: Mapping[str, Sample]) -> bool:
    """True when a pump that shall deliver reports, at whatever time, that it does not."""
    for pump, want in demand.pumps.items():
        if want.flow_mL_min > 0:
            sample = samples.get(program.feedback.get((pump, "state"), ""))
            if sample is not None and sample.value in (PumpState.STOPPED, PumpState.EMPTY):
                return True
    return False


def _wanted(program: Program, demand: Demand) -> list[Wanted]:
    """All orders that would bring the demand about, in the order in which they must leave."""
    mine = program.device_of
    stops, fills, runs = [], [], []
    for pump, want in demand.pumps.items():
        if want.flow_mL_min > 0:
            runs.append(Wanted(pump, Action.DELIVER, want.flow_mL_min))
        else:
            stops.append(Wanted(pump, Action.STOP, 0.0))
        if want.once is not None:
            fills.append(Wanted(pump, want.once.action, want.once.value, want.once.ticket))
    moves = [
        Wanted(valve, Action.MOVE, float(program.valves[valve].index(position)))
        for valve, position in demand.valves.items()
    ]
    baths = [
        wanted
        for chiller, bath in demand.baths.items()
        for wanted in (
            Wanted(chiller, Action.SET_TEMPERATURE, bath.temperature_degC),
            Wanted(chiller, Action.CIRCULATE, float(bath.circulate)),
        )
    ]
    return [wanted for wanted in stops + moves + baths + fills + runs if wanted.unit in mine]


def _same(held: Told, wanted: Wanted) -> bool:
    if wanted.ticket or held.ticket:
        return wanted.ticket == held.ticket
    return held.order.action is wanted.action and held.order.value == wanted.value


def _tries(held: Told | None, wanted: Wanted, now_ns: int) -> int:
    """How often this has been tried; what once worked for a minute starts to count anew."""
    if held is None or not _same(held, wanted) or now_ns - held.order.t_ns > 60_000_000_000:
        return 1
    return held.tries + 1


def _check_running(
    program: Program, held: Told, samples: Mapping[str, Sample], now_ns: int, events: list[Event]
) -> Told:
    """Treat a delivery as failed when the pump agreed and then reports, long enough after, that it stands."""
    if held.order.action is not Action.DELIVER or held.result is not Result.DONE:
        return held
    state = _fresh(program, held.order.unit, "state", samples, held.answered_ns + STANDS_NS)
    if state not in (PumpState.STOPPED, PumpState.EMPTY):
        return held
    unit = held.order.unit
    failed = _failing(replace(held, result=Result.FAILED), now_ns)
    detail = f"the pump reports {PumpState(int(state)).name.lower()}"
    if failed.retry_ns < NEVER_NS:
        fields: Fields = {"number": held.order.number, "result": str(Result.FAILED), "detail": detail}
        events.append(Event(EventKind.ORDER, unit, now_ns, f"{unit} was told to deliver, but {detail}.", fields))
        failed = replace(failed, retry_ns=now_ns)
    return failed


def _must_wait(program: Program, memory: Memory, wanted: Wanted, samples: Mapping[str, Sample]) -> bool:
    """True while a valve, or a filling, must be confirmed before this order may leave."""
    if wanted.action is Action.FILL:
        return not confirmed(program, memory, program.path.feed(wanted.unit).valve, samples)
    if wanted.action is not Action.DELIVER:
        return False
    held = memory.last(wanted.unit, Aspect.RATE)
    if held is not None and held.order.action is Action.DELIVER:
        return False
    if not confirmed(program, memory, program.path.outlet_valve, samples):
        return True
    return program.pumps[wanted.unit].syringes == 1 and _filling(program, memory, wanted.unit, samples)


def confirmed(program: Program, memory: Memory, valve: str, samples: Mapping[str, Sample]) -> bool:
    """True when a valve reports, later than its last order, that it is where it was told to be; or was told nothing."""
    told = memory.told.get((valve, Aspect.POSITION))
    if told is None:
        return True
    return _fresh(program, valve, "position", samples, told.order.t_ns) == told.order.value


def _filling(program: Program, memory: Memory, pump: str, samples: Mapping[str, Sample]) -> bool:
    """True from the order to fill a single syringe until the pump reports that it is done."""
    told = memory.last(pump, Aspect.ONCE)
    if told is None or told.order.action is not Action.FILL:
        return False
    state = _fresh(program, pump, "state", samples, max(told.order.t_ns, told.answered_ns))
    return state is None or state == PumpState.REFILLING


def _fresh(program: Program, unit: str, channel: str, samples: Mapping[str, Sample], after_ns: int) -> float | None:
    """What a unit reports, if it was acquired after ``after_ns`` and can be believed."""
    sample = samples.get(program.feedback.get((unit, channel), ""))
    if sample is None or sample.quality is Quality.BAD or sample.t_ns <= after_ns:
        return None
    return sample.value


def _due_ns(told: Mapping[Key, Told]) -> int:
    return min((held.retry_ns for held in told.values()), default=NEVER_NS)
