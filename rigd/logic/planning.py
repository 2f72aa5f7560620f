"""What a recipe will take, worked out without simulating: times, volumes, refills, and what would not work out.

The same geometry, doses and gates as the sequence uses; only what depends on the rig's answers is estimated: the bath
by its power, the signal gate by its shortest time, the pressure rise by the declared compliances.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.logic.conduct.campaign import PhaseKind, PhaseSpec, campaign
from rigd.logic.conduct.layout import Layout, make_layout
from rigd.logic.plan_phases import ESTIMATES, Effort
from rigd.logic.plan_problems import find_problems
from rigd.logic.program import Program
from rigd.model.problems import Problem


@dataclass(frozen=True, slots=True)
class PhasePlan:
    """One phase: when it starts and how long it takes [s], flows [mL/min] and what is delivered [mL], per pump.

    ``volumes_mL`` counts the liquid that the phase is about, ``ready_mL`` what is kept ready for it where that is more;
    ``drawn_mL`` all liquids that it draws, by liquid id.
    """

    id: str
    label: str
    kind: PhaseKind
    start_s: float
    duration_s: float
    flows_mL_min: Mapping[str, float]
    volumes_mL: Mapping[str, float]
    ready_mL: Mapping[str, float]
    drawn_mL: Mapping[str, float]
    reagent: bool
    refills: int = 0
    point: str = ""


@dataclass(frozen=True, slots=True)
class Plan:
    """The whole run. ``collected_mL`` goes into the flask, ``waste_mL`` elsewhere; ``problems`` are findings."""

    phases: tuple[PhasePlan, ...]
    duration_s: float
    used_mL: Mapping[str, float]
    refills: int
    collected_mL: float
    waste_mL: float
    problems: tuple[Problem, ...] = field(default=())

    def following_mL(self, index: int) -> dict[str, tuple[tuple[float, float], ...]]:
        """Per pump, for each phase after this one up to the next change of liquid: volume, and what to keep ready."""
        found: dict[str, tuple[tuple[float, float], ...]] = {}
        for phase in self.phases[index + 1 :]:
            if phase.reagent is not self.phases[index].reagent or phase.kind is PhaseKind.SWITCHOVER:
                break
            for pump, volume_mL in phase.volumes_mL.items():
                found[pump] = (*found.get(pump, ()), (volume_mL, phase.ready_mL.get(pump, volume_mL)))
        return found


def plan(program: Program) -> Plan:
    """Work it out. Pure; takes milliseconds."""
    layout = make_layout(program)
    phases: list[PhasePlan] = []
    effort = Effort.at_start(layout)
    clock_s = 0.0
    for spec in campaign(program):
        effort = ESTIMATES[spec.kind](layout, spec, effort)
        phases.append(_phase_plan(layout, spec, effort, clock_s))
        clock_s += effort.duration_s
    return _summed(program, layout, tuple(phases))


def _phase_plan(layout: Layout, spec: PhaseSpec, effort: Effort, start_s: float) -> PhasePlan:
    return PhasePlan(
        id=spec.id,
        label=spec.label,
        kind=spec.kind,
        start_s=start_s,
        duration_s=effort.duration_s,
        flows_mL_min=effort.flows_mL_min,
        volumes_mL=effort.volumes_mL,
        ready_mL=effort.ready_mL,
        drawn_mL=effort.drawn_mL(layout, spec.reagent),
        reagent=spec.reagent,
        refills=effort.refills,
        point=spec.point.id if spec.point and spec.kind is PhaseKind.POINT else "",
    )


def _summed(program: Program, layout: Layout, phases: tuple[PhasePlan, ...]) -> Plan:
    used: dict[str, float] = {}
    for phase in phases:
        for liquid, volume_mL in phase.drawn_mL.items():
            used[liquid] = used.get(liquid, 0.0) + volume_mL
    points = sum(1 for phase in phases if phase.kind is PhaseKind.POINT)
    collected_mL = points * layout.recipe.collect.volume_mL
    found = Plan(
        phases=phases,
        duration_s=sum(phase.duration_s for phase in phases),
        used_mL=used,
        refills=sum(phase.refills for phase in phases),
        collected_mL=collected_mL,
        waste_mL=max(0.0, sum(used.values()) - collected_mL),
    )
    problems = find_problems(layout, found.used_mL, found.collected_mL, found.waste_mL)
    return Plan(found.phases, found.duration_s, used, found.refills, collected_mL, found.waste_mL, problems)
