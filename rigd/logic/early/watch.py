"""All early rules together: what a program watches, what is remembered of it, and one look at it.

They warn and never stop anything: their values are tags of the image, and alarms look at those.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from rigd.logic.early import balance, compliance, heat, resistance, scene
from rigd.logic.early.balance import Compared, Meter
from rigd.logic.early.compliance import NO_RISE, Rise
from rigd.logic.early.heat import Bed, Warmth
from rigd.logic.early.path import Stretch, stretches, trunk_parts
from rigd.logic.early.resistance import TOLERANCE, Watched
from rigd.logic.early.scene import LOOK_NS, Course
from rigd.logic.early.viscosity import viscosities
from rigd.logic.flow_path import FlowPath
from rigd.logic.protect.ledger import Ledger
from rigd.logic.protect.signals import Signals
from rigd.logic.protect.timers import NEVER_NS
from rigd.model.events import Event, EventKind
from rigd.model.recipe import Recipe
from rigd.model.rig import LiquidRole, RigDefinition
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

UNKNOWN_VISCOSITY = 2.5
"""Viscosities of common solvents lie within this factor of each other (common practice, no source)."""


@dataclass(frozen=True, slots=True)
class EarlyPlan:
    """What is watched. ``viscosity`` is the solvent's at 0, 25 and 60 degC (``None``: not known), ``tolerance`` the
    range of healthy factors of other liquids over it, ``stiff`` the sensor that shows the compliance, ``ringed`` the
    tags whose recent past is needed."""

    stretches: tuple[Stretch, ...] = ()
    meters: tuple[Meter, ...] = ()
    beds: tuple[Bed, ...] = ()
    stiff: str = ""
    viscosity: tuple[float, float, float] | None = None
    tolerance: tuple[float, float] = (1.0, 1.0)
    room_degC: float = 22.0
    rise_K: float = 0.0
    wetted_mL: float = 0.0
    compliance_mL_bar: float = 0.0
    ringed: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class EarlyState:
    """What is remembered. ``remarks`` says in words what the value of a tag means; ``compliance_mL_bar`` is as last
    measured (0: not yet)."""

    due_ns: int
    course: Course
    watched: tuple[Watched, ...]
    compared: Mapping[str, Compared] = field(default_factory=dict)
    warmth: Mapping[str, Warmth] = field(default_factory=dict)
    rise: Rise = NO_RISE
    compliance_mL_bar: float = 0.0
    remarks: Mapping[str, str] = field(default_factory=dict)
    broken: bool = False


def plan_of(rig: RigDefinition, recipe: Recipe | None, path: FlowPath) -> EarlyPlan:
    """What can be watched of a rig."""
    found = stretches(rig, path)
    chain = trunk_parts(rig, path)
    sections = {segment.id: section.pumps for section in path.sections for segment in section.segments}
    pumps_at = {part: sections.get(part, path.sections[-1].pumps) for part in chain if path.sections}
    meters, beds = balance.meters(rig, pumps_at), heat.beds(rig)
    viscosity, tolerance = _liquids(rig)
    pressures = [tag for one in found for tag in (one.upper, one.lower) if tag]
    return EarlyPlan(
        stretches=found,
        meters=meters,
        beds=beds,
        stiff=found[0].upper if found and path.outlet_valve else "",
        viscosity=viscosity,
        tolerance=tolerance,
        room_degC=rig.simulation.ambient_degC,
        rise_K=heat.rise_K(recipe),
        wetted_mL=path.wetted_mL,
        compliance_mL_bar=sum(pump.compliance_mL_bar for pump in rig.pumps),
        ringed=frozenset((*pressures, *(meter.tag for meter in meters if not meter.vessel))),
    )


def _liquids(rig: RigDefinition) -> tuple[tuple[float, float, float] | None, tuple[float, float]]:
    """Viscosity of the solvent, and how far that of any liquid of the rig may be from it."""
    known = viscosities({liquid.properties for liquid in rig.liquids}, rig.properties)
    solvent = next((liquid.properties for liquid in rig.liquids if liquid.role is LiquidRole.SOLVENT), "")
    base = known.get(solvent)
    if base is None or any(liquid.properties not in known for liquid in rig.liquids):
        return base, (1.0 / UNKNOWN_VISCOSITY, UNKNOWN_VISCOSITY)
    ratios = [three[1] / base[1] for three in known.values()]
    return base, (min(ratios) / TOLERANCE, max(ratios) * TOLERANCE)


def initial(plan: EarlyPlan, now_ns: int) -> EarlyState:
    """Nothing seen yet."""
    return EarlyState(now_ns, Course({}, now_ns), tuple(resistance.initial(one) for one in plan.stretches))


def update(
    program: Program,
    state: EarlyState,
    signals: Signals,
    ledger: Ledger,
    changed: Mapping[str, Sample],
    shown: dict[str, Sample],
    now_ns: int,
) -> tuple[EarlyState, tuple[Event, ...]]:
    """One look, when one is due or the sensor ``stiff`` has a new sample. New values are put into ``shown``.

    Never raises: rules that only warn must not take down what protects. After an error they are silent and say so.
    """
    try:
        return _update(program, state, signals, ledger, changed, shown, now_ns)
    except Exception as error:  # noqa: BLE001
        detail = f"{type(error).__name__}: {error}"
        text = f"The early rules failed and warn no more in this run: {detail}. Keep the journal."
        return replace(state, due_ns=NEVER_NS, broken=True), (
            Event(EventKind.FAULT, "early", now_ns, text, {"detail": detail}),
        )


def _update(
    program: Program,
    state: EarlyState,
    signals: Signals,
    ledger: Ledger,
    changed: Mapping[str, Sample],
    shown: dict[str, Sample],
    now_ns: int,
) -> tuple[EarlyState, tuple[Event, ...]]:
    if state.broken:
        return state, ()
    plan, samples, rings = program.early, signals.samples, signals.rings
    if plan.stiff in changed:
        state = _stiffness(program, state, samples, ledger, changed, shown, now_ns)
    if now_ns < state.due_ns:
        return state, ()
    events: list[Event] = []
    course, seen = scene.look(program, state.course, samples, rings, ledger, now_ns)
    state = replace(state, due_ns=now_ns + LOOK_NS, course=course)
    state = _warmth(program, state, samples, shown, now_ns)
    state = _levels(program, state, samples, ledger, shown, now_ns)
    if seen is None:
        return state, ()
    watched, remarks = [], dict(state.remarks)
    for stretch, known in zip(plan.stretches, state.watched, strict=True):
        after, found, learned = resistance.watch(seen, stretch, known)
        watched.append(after)
        shown.update((sample.tag, sample) for sample in found)
        events += learned
        if after.remark is not known.remark:
            remarks |= {f"{stretch.upper}.resistance": after.remark, f"{stretch.upper}.time-left": after.remark}
    compared = dict(state.compared)
    for meter in plan.meters:
        if meter.pumps:
            compared[meter.tag], ratio = balance.compare_flow(seen, meter, compared.get(meter.tag, Compared()))
            _show(program, shown, f"{meter.tag}.balance", ratio, now_ns)
            _say_balance(remarks, meter, ratio)
    return replace(state, watched=tuple(watched), remarks=remarks, compared=compared), tuple(events)


def _say_balance(remarks: dict[str, str], meter: Meter, ratio: float | None) -> None:
    if ratio is not None:
        what = "the flow of its pumps" if meter.pumps else "what was moved by count"
        remarks[f"{meter.tag}.balance"] = f"{meter.tag} sees {100 * ratio:.0f} % of {what}"


def _show(program: Program, shown: dict[str, Sample], tag: str, value: float | None, now_ns: int) -> None:
    if value is not None and tag in program.tags:
        shown[tag] = Sample(tag, value, now_ns)


def _stiffness(
    program: Program,
    state: EarlyState,
    samples: Mapping[str, Sample],
    ledger: Ledger,
    changed: Mapping[str, Sample],
    shown: dict[str, Sample],
    now_ns: int,
) -> EarlyState:
    rise, found = compliance.follow(program, state.rise, samples, ledger, changed)
    if found is not None:
        tag, stated = f"{program.early.stiff}.compliance", program.early.compliance_mL_bar
        _show(program, shown, tag, found, now_ns)
        remark = f"the shut path takes {1000 * found:.1f} uL per bar, stated are {1000 * stated:.1f}"
        state = replace(state, compliance_mL_bar=found, remarks={**state.remarks, tag: remark})
    return state if rise is state.rise else replace(state, rise=rise)


def _warmth(
    program: Program, state: EarlyState, samples: Mapping[str, Sample], shown: dict[str, Sample], now_ns: int
) -> EarlyState:
    def value(tag: str) -> float | None:
        sample = samples.get(tag)
        return sample.value if sample is not None and sample.quality is Quality.GOOD else None

    plan, warmth, remarks = program.early, dict(state.warmth), dict(state.remarks)
    for bed in plan.beds:
        known, over_K = heat.unexplained_K(bed, warmth.get(bed.tag), value, plan.room_degC, plan.rise_K, now_ns)
        if known is not None and over_K is not None:
            warmth[bed.tag], tag = known, f"{bed.tag}.unexplained"
            _show(program, shown, tag, over_K, now_ns)
            remarks[tag] = f"{bed.tag} is {over_K:.1f} K warmer than bath, room and chemistry explain"
    return replace(state, warmth=warmth, remarks=remarks) if plan.beds else state


def _levels(
    program: Program,
    state: EarlyState,
    samples: Mapping[str, Sample],
    ledger: Ledger,
    shown: dict[str, Sample],
    now_ns: int,
) -> EarlyState:
    compared, remarks = dict(state.compared), dict(state.remarks)
    for meter in program.early.meters:
        sample = samples.get(meter.tag) if meter.vessel else None
        if sample is not None and sample.quality is Quality.GOOD:
            known = compared.get(meter.tag, Compared())
            compared[meter.tag], ratio = balance.compare_level(meter, known, sample.value, ledger)
            _show(program, shown, f"{meter.tag}.balance", ratio, now_ns)
            _say_balance(remarks, meter, ratio)
    return replace(state, compared=compared, remarks=remarks) if program.early.meters else state
