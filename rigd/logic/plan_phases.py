"""How long each kind of phase takes and what it draws; one function per kind, chained by what is left behind."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace

from rigd.logic.conduct.campaign import PhaseKind, PhaseSpec
from rigd.logic.conduct.conditioning import batch
from rigd.logic.conduct.doses import Dose
from rigd.logic.conduct.layout import Layout, PumpLayout, liquid_of
from rigd.logic.conduct.leak_test import fill_flows
from rigd.logic.conduct.point_needs import point_mL, settle_s
from rigd.logic.conduct.shares import flush_doses, prime_doses, rinse_doses, solvent_flows
from rigd.logic.conduct.switchover import flows_of, label

LATENCY_S = 2.0
"""From an order until its effect has been seen: one sample of the pump and of the valve each."""

BATH_J_mL_K = 4.17
BATH_TAIL_S = 60.0
"""Heat capacity of water; and how long a bath creeps into its band after full power (assumption, no source)."""

PARK_S = 10.0


@dataclass(frozen=True, slots=True)
class Effort:
    """Result of one phase and start of the next. ``left_mL`` is what is left in each pump of the phase's liquid;
    ``bath_degC`` and ``bath_s`` where the bath is sent and how long it still needs."""

    duration_s: float = 0.0
    flows_mL_min: Mapping[str, float] = field(default_factory=dict)
    volumes_mL: Mapping[str, float] = field(default_factory=dict)
    doses: Mapping[str, Sequence[Dose]] = field(default_factory=dict)
    left_mL: Mapping[str, float] = field(default_factory=dict)
    refills: int = 0
    bath_degC: float = 22.0
    bath_s: float = 0.0
    ready_mL: Mapping[str, float] = field(default_factory=dict)

    @classmethod
    def at_start(cls, layout: Layout) -> Effort:
        """Empty syringes, bath at room temperature."""
        return cls(left_mL=dict.fromkeys(layout.pumps, 0.0), bath_degC=layout.rig.simulation.ambient_degC)

    def drawn_mL(self, layout: Layout, reagent: bool) -> dict[str, float]:
        """By liquid id: the doses where there are any, else the volumes of the phase."""
        drawn: dict[str, float] = {}
        for pump, volume_mL in self.volumes_mL.items():
            rows = self.doses.get(pump) or (Dose(label(layout.pumps[pump], reagent), volume_mL),)
            for dose in rows:
                liquid = liquid_of(dose.label)
                drawn[liquid] = drawn.get(liquid, 0.0) + dose.volume_mL
        return drawn

    def towards(self, layout: Layout, degC: float | None) -> Effort:
        """Send the bath somewhere; how long it needs follows from its power."""
        if degC is None or not layout.rig.chillers or degC == self.bath_degC:
            return self
        chiller = layout.rig.chillers[0]
        watt = chiller.heating_W if degC > self.bath_degC else chiller.cooling_W
        seconds = abs(degC - self.bath_degC) * chiller.bath_mL * BATH_J_mL_K / max(watt, 1.0) + BATH_TAIL_S
        return replace(self, bath_degC=degC, bath_s=seconds)

    def after(self, seconds: float) -> float:
        """What the bath still needs after a phase."""
        return max(0.0, self.bath_s - seconds)


def _fill_s(play: PumpLayout, volume_mL: float) -> float:
    """Valve, drawing, and noticing that it is done."""
    return play.refill_s(min(volume_mL, play.pump.stroke_mL)) + LATENCY_S


def _valve_s(layout: Layout, valve: str) -> float:
    found = layout.program.valves.get(valve)
    return found.travel_s + LATENCY_S / 2 if found else 0.0


def _doses_s(layout: Layout, doses: Sequence[Dose], play: PumpLayout, flow: float, left_mL: float) -> float:
    """One pump through its doses: run out what is left, fill (the first batch with the pump waiting), deliver."""
    seconds, before_mL = 0.0, left_mL
    for dose in doses:
        first_mL = min(dose.batch_mL(play), play.pump.stroke_mL)
        seconds += 60.0 * before_mL / flow + _valve_s(layout, play.feed.valve) + _fill_s(play, first_mL)
        if not play.dual:
            more = max(0, -int(-dose.volume_mL // play.pump.stroke_mL) - 1)
            seconds += more * (_fill_s(play, play.pump.stroke_mL) + LATENCY_S) + 4.0
        seconds += 60.0 * dose.volume_mL / flow
        before_mL = play.reserve_mL(flow)
    return seconds


def _dosed(layout: Layout, doses: Mapping[str, Sequence[Dose]], flows: Mapping[str, float], start: Effort) -> Effort:
    times = [
        _doses_s(layout, row, layout.pumps[name], flows[name], start.left_mL.get(name, 0.0))
        for name, row in doses.items()
    ]
    volumes = {name: sum(dose.volume_mL for dose in row) for name, row in doses.items()}
    left = {name: layout.pumps[name].reserve_mL(flows[name]) for name in doses}
    fills = sum(len(row) * layout.pumps[name].pump.syringes for name, row in doses.items())
    seconds = max(times, default=0.0)
    drawn = {name: _with_reserve(row, left[name]) for name, row in doses.items()}
    return Effort(
        seconds, flows, volumes, drawn, {**start.left_mL, **left}, fills, start.bath_degC, start.after(seconds)
    )


def _with_reserve(doses: Sequence[Dose], reserve_mL: float) -> tuple[Dose, ...]:
    """As drawn: each dose is filled with a reserve that runs out before the next liquid."""
    return tuple(replace(dose, volume_mL=dose.volume_mL + reserve_mL) for dose in doses)


def _prime(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    rule = layout.recipe.prime
    assert rule is not None, "a prime phase without a prime table"
    warm = layout.recipe.conditioning.temperature_degC if layout.recipe.conditioning else None
    flows = solvent_flows(layout, rule.total_mL_min)
    return _dosed(layout, prime_doses(layout, rule), flows, before.towards(layout, warm))


def _conditioning(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    rule = layout.recipe.conditioning
    assert rule is not None, "a conditioning phase without a conditioning table"
    before = before.towards(layout, rule.temperature_degC)
    flows = solvent_flows(layout, rule.total_mL_min)
    by_volume_s = rule.volumes * layout.path.residence_s(flows) + 5.0
    seconds = max(by_volume_s, rule.min_s, before.bath_s + rule.steady_s)
    volumes = {name: flow * seconds / 60.0 for name, flow in flows.items()}
    left = {name: _left_mL(layout.pumps[name], flow) for name, flow in flows.items()}
    refills = sum(int(volumes[name] / batch(layout.pumps[name], flow)) + 1 for name, flow in flows.items())
    return Effort(seconds, flows, volumes, {}, {**before.left_mL, **left}, refills, before.bath_degC)


def _left_mL(play: PumpLayout, flow: float) -> float:
    """Left when it is not known in advance when to stop: half a filling; a single syringe is filled as needed."""
    return 0.5 * batch(play, flow) if play.dual else play.reserve_mL(flow)


def _leak_test(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    rule = layout.recipe.leak_test
    assert rule is not None, "a leak test phase without a leak test table"
    flows = fill_flows(layout, rule)
    total = sum(flows.values())
    compliance = sum(play.pump.compliance_mL_bar for play in layout.pumps.values())
    rise_s = min(60.0 * compliance * rule.pressure_bar / total if total else 0.0, rule.fill_s_max)
    needs = {name: flow * rule.fill_s_max / 60.0 for name, flow in flows.items()}
    missing = {name: max(0.0, need_mL - before.left_mL.get(name, 0.0)) for name, need_mL in needs.items()}
    charge_s = max((_fill_s(layout.pumps[name], mL) for name, mL in missing.items() if mL > 0), default=0.0)
    valves_s = 2 * _valve_s(layout, layout.path.outlet_valve)
    seconds = charge_s + rise_s + rule.settle_s + rule.hold_s + valves_s + 2 * LATENCY_S
    left = {name: max(needs[name], before.left_mL.get(name, 0.0)) for name in flows}
    return Effort(seconds, flows, missing, {}, {**before.left_mL, **left}, 0, before.bath_degC)


def _switchover(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    flows = flows_of(layout, spec.reagent, spec.slow, spec.point)
    rule = layout.recipe.switchover
    doses = rinse_doses(layout, rule.rinses, spec.reagent, flows) if rule else {}
    rinsed = _dosed(layout, doses, flows, before) if doses else replace(before, duration_s=0.0, refills=0, doses={})
    charge_s = meet_s = 0.0
    for name, flow in flows.items():
        play = layout.pumps[name]
        fill_s = _fill_s(play, play.pump.stroke_mL) + _valve_s(layout, play.feed.valve)
        charge_s = max(charge_s, fill_s if spec.reagent or not play.dual else 0.0)
        meet_s = max(meet_s, 60.0 * (rinsed.left_mL.get(name, 0.0) + play.feed.outlet_mL) / flow)
    volumes = {name: layout.pumps[name].feed.outlet_mL for name in flows}
    rinses = {
        name: (*rinsed.doses.get(name, ()), Dose(label(layout.pumps[name], spec.reagent), mL))
        for name, mL in volumes.items()
    }
    left = {name: layout.pumps[name].pump.stroke_mL for name in flows}
    seconds = rinsed.duration_s + charge_s + meet_s
    return Effort(seconds, flows, volumes, rinses, {**before.left_mL, **left}, rinsed.refills + len(flows),
                  before.bath_degC, before.after(seconds))  # fmt: skip


def _point(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    point = spec.point
    assert point is not None, "a point phase without a point"
    before = before.towards(layout, point.temperature_degC)
    total = point.total_mL_min
    collect_s = 60.0 * (layout.dead_mL + layout.recipe.collect.volume_mL) / total
    valves_s = 2 * _valve_s(layout, layout.path.outlet_valve)
    running_s = LATENCY_S + before.bath_s + settle_s(layout, point, spec.reagent) + collect_s + valves_s
    refill_s, refills, left, volumes = 0.0, 0, dict(before.left_mL), {}
    ready = {name: point_mL(layout, point, name, spec.reagent) for name in point.flows_mL_min}
    for name, flow in point.flows_mL_min.items():
        play = layout.pumps[name]
        volumes[name] = flow * running_s / 60.0
        left_mL = left.get(name, 0.0)
        if left_mL < ready[name] + play.guard_mL(flow):
            refills += 1
            if not play.dual:
                refill_s = max(refill_s, _fill_s(play, play.pump.stroke_mL - left_mL) + LATENCY_S)
            left_mL = play.pump.stroke_mL if not play.dual else left_mL + play.pump.stroke_mL
        left[name] = max(0.0, left_mL - volumes[name])
    flows = dict(point.flows_mL_min)
    return Effort(running_s + refill_s, flows, volumes, {}, left, refills, before.bath_degC, ready_mL=ready)


def _flush(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    flows = solvent_flows(layout, layout.recipe.flush.total_mL_min)
    planned = {name: layout.pumps[name].reserve_mL(flow) for name, flow in flows.items()}
    start = replace(before, left_mL={**before.left_mL, **planned})
    effort = _dosed(layout, flush_doses(layout, layout.recipe.flush), flows, start)
    return effort.towards(layout, layout.recipe.flush.temperature_degC)


def _park(layout: Layout, spec: PhaseSpec, before: Effort) -> Effort:
    return Effort(PARK_S, bath_degC=before.bath_degC)


ESTIMATES: Mapping[PhaseKind, Callable[[Layout, PhaseSpec, Effort], Effort]] = {
    PhaseKind.PRIME: _prime,
    PhaseKind.CONDITIONING: _conditioning,
    PhaseKind.LEAK_TEST: _leak_test,
    PhaseKind.SWITCHOVER: _switchover,
    PhaseKind.POINT: _point,
    PhaseKind.FLUSH: _flush,
    PhaseKind.PARK: _park,
}
