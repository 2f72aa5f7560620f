"""What goes wrong in bed and room."""

from __future__ import annotations

import math

from rigd.model.rig import RigDefinition
from rigd_sim.faults import targets
from rigd_sim.faults.build import effect
from rigd_sim.plant.ailments import Situation
from rigd_sim.plant.levers import Levers

HOUR_S = 3600.0
ROOM = "room"


def _room(rig: RigDefinition) -> tuple[str, ...]:
    return (ROOM,)


def _exotherm(levers: Levers, situation: Situation) -> None:
    target = situation.fault.target
    levers.exotherm_W[target] = levers.exotherm_W.get(target, 0.0) + situation.fault.magnitude


def _poison(levers: Levers, situation: Situation) -> None:
    target = situation.fault.target
    levers.activity[target] = levers.activity.get(target, 1.0) * (1.0 - situation.fault.magnitude)


def _ageing(levers: Levers, situation: Situation) -> None:
    target = situation.fault.target
    keep = math.exp(-situation.fault.magnitude * situation.elapsed_s / HOUR_S)
    levers.activity[target] = levers.activity.get(target, 1.0) * keep


def _hot_spot(levers: Levers, situation: Situation) -> None:
    target = situation.fault.target
    levers.activity[target] = levers.activity.get(target, 1.0) * situation.fault.magnitude


def _room_changes(levers: Levers, situation: Situation) -> None:
    levers.room_K += situation.fault.magnitude


EFFECTS = (
    effect("exotherm", "heat from a reaction not planned", targets.columns, "column", "heat [W]", _exotherm,
           "bed temperature rises, jacket later", "H18 H38"),
    effect("poisoning", "catalyst loses activity at once", targets.columns, "column", "share lost, 0 to 1", _poison,
           "conversion steps down at the same flow", "H39"),
    effect("deactivation", "catalyst ages fast", targets.columns, "column", "kd [1/h]", _ageing,
           "conversion sinks from point to point, return points lower", "H39"),
    effect("too-active", "fresh catalyst at restart", targets.columns, "column", "activity factor", _hot_spot,
           "conversion and reaction heat high at first contact", "H18 H38"),
    effect("room", "room warmer or colder", _room, ROOM, "difference [K]", _room_changes,
           "bath loss, liquid at room temperature, pressure with viscosity", "H4"),
)  # fmt: skip
