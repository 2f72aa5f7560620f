"""The flush of a quench: solvent through the path by every pump that can give solvent and nothing else.

House rules: a syringe that may hold reagent delivers nothing, and a pump whose two syringes do cannot flush at all; a
pump is stopped while it changes over, delivers only when its counters show solvent in the active syringe, and stops
before it would change over to a reagent by itself. What has been flushed is what the counters say. When nothing can
flush, or a condition fails on the way, the caller cuts; when the solvent in the syringes is used up, the flush ends
short.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from rigd.logic.arbitration import Aspect, Memory
from rigd.logic.demand import OneShot, PumpDemand
from rigd.logic.protect.ledger import Content, Count, Ledger
from rigd.logic.protect.signals import Signals, is_online
from rigd.model.devices import VALVE_LOST, PumpState
from rigd.model.orders import Action, Result
from rigd.model.rig import Pump
from rigd.model.samples import Quality

if TYPE_CHECKING:
    from rigd.logic.program import Program

DEFAULT_VOLUMES = 3.0
"""Wetted volumes to flush when no chemistry sheet says otherwise (proposal; no source)."""

SLACK_NS = 60_000_000_000
FILL_SLACK_NS = 5_000_000_000
RESERVE_S = 5.0
"""A pump whose other syringe holds reagent stops when its solvent lasts for less than this."""

REFUSED_NS = 1_000_000_000
"""A one-shot that the pump refused is asked for again, as a new one, after this time."""

SHORT_mL = 0.01
"""By how much a filling may fall short and still be complete; counters are read with three decimals."""


@dataclass(frozen=True, slots=True)
class Flush:
    """A flush under way. ``rates`` are those of the pumps that take part; ``once`` the one-shot each was given last."""

    target_mL: float
    start_mL: float
    deadline_ns: int
    rates: Mapping[str, float]
    once: Mapping[str, OneShot] = field(default_factory=dict)
    serial: int = 0

    def done_mL(self, ledger: Ledger) -> float:
        """Delivered since the flush began."""
        return sum(ledger.delivered.values()) - self.start_mL


def target_mL(program: Program) -> float:
    """Volume of a whole flush, by the chemistry sheet."""
    sheet = program.recipe.sheet
    return (DEFAULT_VOLUMES if sheet is None else sheet.flush_volumes) * program.path.wetted_mL


def begin(program: Program, ledger: Ledger, signals: Signals, now_ns: int) -> Flush | str:
    """Start a flush, or say why there can be none."""
    target = target_mL(program)
    able = [pump for pump in program.pumps.values() if _able(program, ledger, signals, pump)]
    if not able:
        return "no pump can deliver solvent: every syringe holds reagent, or what it holds is not known"
    share = program.rig.flush_mL_min / len(able)
    rates = {pump.id: min(max(share, pump.rate_min_mL_min), pump.rate_max_mL_min) for pump in able}
    flow_s = 60.0 * target / sum(rates.values())
    fill_s = 60.0 * (target / len(able)) / min(pump.refill_rate_mL_min for pump in able)
    floor_ns = program.options.stale_floor_ns + program.options.travel_floor_ns
    deadline_ns = now_ns + int(2e9 * (flow_s + fill_s)) + SLACK_NS + 10 * floor_ns
    return Flush(target, sum(ledger.delivered.values()), deadline_ns, rates)


def trouble(program: Program, flush: Flush, ledger: Ledger, signals: Signals, now_ns: int) -> str:
    """Why the flush cannot go on, "" while it can."""
    if now_ns >= flush.deadline_ns:
        done = flush.done_mL(ledger)
        return f"the flush was not done in time ({done:.1f} of {flush.target_mL:.1f} mL)"
    valves = {program.path.feed(pump).valve for pump in flush.rates} | {program.path.outlet_valve}
    for unit in (*flush.rates, *sorted(valves)):
        device = program.device_of.get(unit)
        if device is not None and not is_online(signals.devices.get(device)):
            return f"{unit} does not answer"
    for tag in sorted(program.ringed):
        sample = signals.samples.get(tag)
        if program.tags[tag].measures == "pressure" and (sample is None or sample.quality is Quality.BAD):
            return f"the pressure {tag} is not known"
    outlet = signals.samples.get(program.feedback.get((program.path.outlet_valve, "position"), ""))
    if outlet is not None and (outlet.quality is Quality.BAD or outlet.value == VALVE_LOST):
        return f"it is not known where {program.path.outlet_valve} stands"
    return ""


@dataclass(frozen=True, slots=True)
class Scene:
    """What a step of the flush looks at."""

    program: Program
    ledger: Ledger
    signals: Signals
    memory: Memory
    now_ns: int


def step(scene: Scene, flush: Flush) -> tuple[Flush, dict[str, PumpDemand]]:
    """What each pump shall do now. An empty mapping means that no pump can go on."""
    demands: dict[str, PumpDemand] = {}
    for name in flush.rates:
        count = scene.ledger.counts.get(name)
        if count is None:
            continue
        pump = scene.program.pumps[name]
        if name in flush.once and _is_over(scene, pump, count, flush.once[name]):
            flush = replace(flush, once={key: once for key, once in flush.once.items() if key != name})
        found = _pump(scene, flush, pump, count)
        if found is None:
            continue
        demands[name] = found
        if found.once is not None and flush.once.get(name) is not found.once:
            flush = replace(flush, once={**flush.once, name: found.once}, serial=flush.serial + 1)
    return flush, demands


def _able(program: Program, ledger: Ledger, signals: Signals, pump: Pump) -> bool:
    count = ledger.counts.get(pump.id)
    if count is None or not is_online(signals.devices.get(pump.device)):
        return False
    if Content.SOLVENT in _syringes(pump, count):
        return True
    return _filling_syringe(pump, count) is Content.EMPTY and _has_solvent(program, ledger, pump, 0.0)


def _syringes(pump: Pump, count: Count) -> tuple[Content, ...]:
    return (count.active, count.standby) if pump.syringes == 2 else (count.active,)


def _filling_syringe(pump: Pump, count: Count) -> Content:
    return count.standby if pump.syringes == 2 else count.active


def _has_solvent(program: Program, ledger: Ledger, pump: Pump, volume_mL: float) -> bool:
    """True when the rest position of the pump's feed valve draws solvent and its bottle still has this much."""
    valve = program.valves.get(program.path.feed(pump.id).valve)
    line = program.supply[pump.id].get(valve.rest if valve is not None else "")
    return line is not None and program.is_solvent(line.liquid) and ledger.vessels[line.vessel] > volume_mL


def _pump(scene: Scene, flush: Flush, pump: Pump, count: Count) -> PumpDemand | None:
    """One pump: fill while something is to be filled, change over to solvent, deliver solvent."""
    given = flush.once.get(pump.id)
    filling = given is not None and given.action is Action.FILL
    flows = count.active is Content.SOLVENT and not _is_last(flush, pump, count)
    rate = flush.rates[pump.id] if flows and (pump.syringes == 2 or not filling) else 0.0
    if given is not None:
        return PumpDemand(rate, given)
    if pump.syringes == 2 and count.standby is Content.SOLVENT and not flows:
        return PumpDemand(0.0, _ticket(flush, pump, Action.SWAP, 0.0))
    volume = _to_fill_mL(scene, flush, pump, count, flows)
    if volume > 0:
        return PumpDemand(rate if pump.syringes == 2 else 0.0, _ticket(flush, pump, Action.FILL, volume))
    return PumpDemand(rate) if flows else None


def _is_last(flush: Flush, pump: Pump, count: Count) -> bool:
    """True when the next thing out of the pump could be reagent."""
    reserve_mL = _reserve_mL(flush, pump)
    return pump.syringes == 2 and count.standby is Content.REAGENT and count.level_mL < reserve_mL


def _reserve_mL(flush: Flush, pump: Pump) -> float:
    return flush.rates[pump.id] * RESERVE_S / 60.0


def _to_fill_mL(scene: Scene, flush: Flush, pump: Pump, count: Count, flows: bool) -> float:
    """What should be drawn now for this pump's share of what is left, 0 for nothing."""
    left = (flush.target_mL - flush.done_mL(scene.ledger)) * flush.rates[pump.id] / sum(flush.rates.values())
    short = left - (count.level_mL if flows else 0.0)
    if _filling_syringe(pump, count) is not Content.EMPTY or (flows and short <= 0):
        return 0.0
    volume = min(pump.stroke_mL, max(short + 2 * _reserve_mL(flush, pump), 0.1 * pump.stroke_mL))
    return volume if _has_solvent(scene.program, scene.ledger, pump, volume) else 0.0


def _is_over(scene: Scene, pump: Pump, count: Count, given: OneShot) -> bool:
    """True when a filling or change-over shows in the counters, was refused, or should be long done."""
    told = scene.memory.told.get((pump.id, Aspect.ONCE))
    if told is None or told.ticket != given.ticket:
        return False
    if told.result is Result.REFUSED and scene.now_ns >= told.answered_ns + REFUSED_NS:
        return True
    if given.action is Action.SWAP:
        return count.active is Content.SOLVENT
    slack_ns = FILL_SLACK_NS + scene.program.options.stale_floor_ns
    if scene.now_ns > told.order.t_ns + int(120e9 * given.value / pump.refill_rate_mL_min) + slack_ns:
        return True
    enough_mL = given.value - SHORT_mL
    if pump.syringes == 2:
        return count.standby_mL >= enough_mL
    state = scene.signals.samples.get(scene.program.feedback.get((pump.id, "state"), ""))
    return count.level_mL >= enough_mL and (state is None or state.value != PumpState.REFILLING)


def _ticket(flush: Flush, pump: Pump, action: Action, value: float) -> OneShot:
    return OneShot(f"flush-{flush.serial}-{pump.id}", action, value)
