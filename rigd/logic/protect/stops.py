"""Cut and quench: what they demand of every unit, how they escalate, and when they are done.

House rules: cut beats quench beats hold; the stop in force never comes down but by a reset; a stop that was ordered is
not a stop until each pump has said so, with a sample acquired after the order; until then the order is repeated. A hold
is the sequence's to carry out: protect only names it. End state of both stops: pumps stopped, valves at rest, baths
circulating at the safe temperature.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.arbitration import Aspect, Memory
from rigd.logic.demand import BathDemand, Demand, PumpDemand
from rigd.logic.protect import flush as flushing
from rigd.logic.protect.flush import Flush, Scene
from rigd.logic.protect.interlocks import Interlocks
from rigd.logic.protect.timers import NEVER_NS
from rigd.model.devices import PumpState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Action, Authority, Stop
from rigd.model.rig import Pump
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

PATIENCE_NS = 1_000_000_000
"""A pump must confirm its stop within this time, plus the period at which its state is read."""

START_UP = "START-UP"

_CUT = "every pump was ordered to stop, the valves to rest and the baths to their safe temperature"

_AT_REST = (PumpState.STOPPED, PumpState.STALLED, PumpState.EMPTY)


@dataclass(frozen=True, slots=True)
class Stopping:
    """The stop in force. ``since_ns``: when it last changed its demand; ``again``: pumps whose stop must be ordered
    again; ``overdue``: those that do not confirm."""

    level: Stop
    source: str
    demand: Demand | None
    since_ns: int
    flush: Flush | None = None
    failed: bool = False
    done: bool = False
    again: frozenset[str] = frozenset()
    overdue: tuple[str, ...] = ()
    due_ns: int = NEVER_NS


def initial(program: Program, now_ns: int) -> Stopping:
    """Start-up is a trip: the end state of a cut is ordered, whatever the devices were doing."""
    return Stopping(Stop.CUT, START_UP, rest(program, Authority.CUT, START_UP), now_ns)


def did(stopping: Stopping) -> str:
    """What the stop in force made the rig do, as a clause."""
    match stopping.level:
        case Stop.CUT:
            return f"a flush was not possible and {_CUT}" if stopping.failed else _CUT
        case Stop.QUENCH if stopping.flush is not None:
            return "the reagents were stopped and a flush with solvent began, after which everything stops"
        case Stop.QUENCH:
            return f"{_CUT}, nothing having been delivered that needs a flush"
        case Stop.HOLD:
            return "a hold was asked for"
        case _:
            return "nothing was stopped"


def rest(program: Program, authority: Authority, source: str, pumps: Mapping[str, PumpDemand] | None = None) -> Demand:
    """Everything at rest, save what ``pumps`` still lets some pumps do."""
    still = PumpDemand()
    chosen = pumps or {}
    return Demand(
        authority,
        source,
        pumps={pump: chosen.get(pump, still) for pump in program.pumps},
        valves={valve.id: valve.rest for valve in program.rig.valves},
        baths={chiller: BathDemand(safe_degC(program, chiller)) for chiller in program.chillers},
    )


def safe_degC(program: Program, chiller: str) -> float:
    """The chemistry sheet's safe temperature within the chiller's range; the chiller's own without a sheet."""
    bath, sheet = program.chillers[chiller], program.recipe.sheet
    wished = bath.safe_degC if sheet is None else sheet.safe_degC
    return min(max(wished, bath.low_degC), bath.high_degC)


def advance(scene: Scene, stopping: Stopping, interlocks: Interlocks) -> tuple[Stopping, list[Event]]:
    """Bring the stop in force up to what the interlocks ask for, and on towards its end."""
    events: list[Event] = []
    level = interlocks.level
    if stopping.failed and level is Stop.QUENCH:
        level = Stop.CUT
    if level != stopping.level:
        stopping = _change(scene, stopping, level, interlocks.driver, events)
    if stopping.flush is not None:
        stopping = _flush_on(scene, stopping, stopping.flush, events)
    if stopping.level >= Stop.QUENCH:
        before, stopping = stopping, _confirm(scene, stopping)
        if stopping.done and not before.done and stopping.source != START_UP:
            text = "Every pump has confirmed that it stands and that nothing flows."
            events.append(_event(scene, stopping.level, stopping.source, text))
    return stopping, events


def _change(scene: Scene, stopping: Stopping, level: Stop, driver: str, events: list[Event]) -> Stopping:
    assert level > stopping.level or level is Stop.NONE, "a stop never comes down but by a reset"
    source = driver or stopping.source or START_UP
    match level:
        case Stop.CUT:
            events.append(_event(scene, level, source, "Cut: all pumps stop, valves go to rest, baths to safe."))
            return Stopping(level, source, rest(scene.program, Authority.CUT, source), scene.now_ns)
        case Stop.QUENCH:
            return _quench(scene, source, events)
        case Stop.HOLD:
            events.append(_event(scene, level, source, f"Hold asked for by {source}."))
            return Stopping(level, source, None, scene.now_ns)
        case _:
            events.append(_event(scene, level, "", "All interlocks are reset; nothing moves until a new start."))
            return Stopping(level, "", None, scene.now_ns)


def _quench(scene: Scene, source: str, events: list[Event]) -> Stopping:
    program = scene.program
    if not any(scene.ledger.delivered.values()):
        text = "Quench: nothing has been delivered, so there is nothing to flush; pumps stop and valves go to rest."
        events.append(_event(scene, Stop.QUENCH, source, text))
        return Stopping(Stop.QUENCH, source, rest(program, Authority.QUENCH, source), scene.now_ns)
    flush = flushing.begin(program, scene.ledger, scene.signals, scene.now_ns)
    if isinstance(flush, str):
        return _cut_instead(scene, source, flush, events)
    stays = [pump for pump in program.pumps if pump not in flush.rates]
    left_out = f" {', '.join(stays)} may hold reagent and cannot be flushed: stopped." if stays else ""
    text = f"Quench: reagents off, {flush.target_mL:.1f} mL of solvent by {', '.join(flush.rates)}.{left_out}"
    events.append(_event(scene, Stop.QUENCH, source, text))
    return Stopping(Stop.QUENCH, source, rest(program, Authority.QUENCH, source), scene.now_ns, flush)


def _cut_instead(scene: Scene, source: str, why: str, events: list[Event]) -> Stopping:
    events.append(_event(scene, Stop.CUT, source, f"Cut instead of a quench: {why}."))
    return Stopping(Stop.CUT, source, rest(scene.program, Authority.CUT, source), scene.now_ns, failed=True)


def _flush_on(scene: Scene, stopping: Stopping, flush: Flush, events: list[Event]) -> Stopping:
    """One scan of the flush: on, to its end, or into a cut."""
    done_mL = flush.done_mL(scene.ledger)
    why = flushing.trouble(scene.program, flush, scene.ledger, scene.signals, scene.now_ns)
    if why:
        return _cut_instead(scene, stopping.source, why, events)
    flush, pumps = flushing.step(scene, flush)
    finished = done_mL >= flush.target_mL
    if not finished and not pumps and done_mL <= 0:
        return _cut_instead(scene, stopping.source, "no pump can deliver solvent any more", events)
    if finished or not pumps:
        short = "" if finished else f" of {flush.target_mL:.1f} mL, then no solvent was left in the syringes"
        text = f"The flush has ended after {done_mL:.1f} mL{short}; pumps stop."
        events.append(_event(scene, Stop.QUENCH, stopping.source, text))
        demand = rest(scene.program, Authority.QUENCH, stopping.source)
        return replace(stopping, flush=None, demand=demand, since_ns=scene.now_ns)
    demand = rest(scene.program, Authority.QUENCH, stopping.source, pumps)
    if demand == stopping.demand:
        return replace(stopping, flush=flush)
    return replace(stopping, flush=flush, demand=demand, since_ns=scene.now_ns)


def _confirm(scene: Scene, stopping: Stopping) -> Stopping:
    """Which pumps have confirmed, which must be told again, and when to look again."""
    demand = stopping.demand
    assert demand is not None
    resting = [name for name, want in demand.pumps.items() if want.flow_mL_min == 0 and want.once is None]
    again, overdue, due_ns, waiting = set(), [], NEVER_NS, False
    for name in resting:
        if is_stopped(scene.program, scene.memory, scene.signals.samples, name):
            continue
        waiting = True
        told = scene.memory.last(name, Aspect.RATE)
        ordered = told is not None and told.order.action is Action.STOP
        told_ns = told.order.t_ns if told is not None and ordered else stopping.since_ns
        end_ns = told_ns + patience_ns(scene.program, name)
        if scene.now_ns >= end_ns:
            overdue.append(name)
            if ordered:  # an order that failed is repeated by arbitration
                again.add(name)
        else:
            due_ns = min(due_ns, end_ns)
            overdue += [name] if name in stopping.overdue else []
    done = stopping.flush is None and not waiting
    after = (done, frozenset(again), tuple(overdue), due_ns)
    if after == (stopping.done, stopping.again, stopping.overdue, stopping.due_ns):
        return stopping
    return replace(stopping, done=done, again=frozenset(again), overdue=tuple(overdue), due_ns=due_ns)


def patience_ns(program: Program, pump: str) -> int:
    """How long a pump has to confirm a stop: until its state must have been read once more."""
    tag = program.tags.get(program.feedback.get((pump, "state"), ""))
    period_ns = 0 if tag is None else tag.period_ns
    return max(PATIENCE_NS + period_ns, program.options.stale_floor_ns)


def is_stopped(program: Program, memory: Memory, samples: Mapping[str, Sample], name: str) -> bool:
    """True when a pump was told to stop and has reported, later than that, that it stands and nothing flows."""
    told = memory.last(name, Aspect.RATE)
    if told is None or told.order.action is not Action.STOP:
        return False
    state = _reported(program, samples, name, "state", told.order.t_ns)
    flow = _reported(program, samples, name, "flow", told.order.t_ns)
    return state in _AT_REST and flow is not None and abs(flow) <= _nothing_mL_min(program.pumps[name])


def _nothing_mL_min(pump: Pump) -> float:
    return 0.5 * pump.rate_min_mL_min


def _reported(program: Program, samples: Mapping[str, Sample], unit: str, channel: str, after_ns: int) -> float | None:
    sample = samples.get(program.feedback.get((unit, channel), ""))
    if sample is None or sample.quality is Quality.BAD or sample.t_ns <= after_ns:
        return None
    return sample.value


def _event(scene: Scene, level: Stop, cause: str, text: str) -> Event:
    return Event(EventKind.STOP, level.name.lower(), scene.now_ns, text, {"cause": cause})
