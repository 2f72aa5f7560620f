"""What the early rules of a rig can see, reckoned from its geometry before anything flows."""

from __future__ import annotations

from dataclasses import dataclass

from rigd.config.early import early_plan
from rigd.logic.early.path import Stretch
from rigd.logic.early.viscosity import viscosity_mPa_s
from rigd.logic.early.watch import EarlyPlan
from rigd.model.protection import ConditionKind
from rigd.model.rig import RigDefinition


@dataclass(frozen=True, slots=True)
class Sight:
    """A watched stretch in words, the change at which it is told (0.4: 40 % more), and the total flow [mL/min] from
    which such a change is larger than what the sensors are worth; at less only larger changes are seen."""

    stretch: str
    change: float
    from_mL_min: float


def early_sight(rig: RigDefinition) -> tuple[Sight, ...]:
    """Every stretch whose resistance is watched and whose alarm the rig still has."""
    plan = early_plan(rig)
    limits = {
        alarm.condition.tag: alarm.condition.limit
        for alarm in rig.alarms
        if alarm.condition.kind is ConditionKind.HIGH and alarm.condition.tag.endswith(".resistance")
    }
    found = [(one, limits.get(f"{one.upper}.resistance", 1.0) - 1.0) for one in plan.stretches]
    return tuple(Sight(one.words, change, _from_mL_min(plan, one, change)) for one, change in found if change > 0)


def _from_mL_min(plan: EarlyPlan, stretch: Stretch, change: float) -> float:
    """Flow at which ``change`` of the declared drop equals the band; all pumps of the rig sharing alike."""
    mu = 1.0 if plan.viscosity is None else viscosity_mPa_s(plan.viscosity, plan.room_degC)
    pumps = {pump for one in plan.stretches for piece in one.pieces for pump in piece.pumps}
    per_total = sum(piece.per_flow * mu * len(piece.pumps) / len(pumps) for piece in stretch.pieces)
    return stretch.band_bar / (change * per_total)
