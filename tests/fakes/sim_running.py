"""The demonstration rig in the middle of a run, for tests of faults."""

from __future__ import annotations

import numpy as np
from fakes.sim_rigs import S_NS, two_pump_rig

from rigd.model.orders import Action
from rigd_sim.faults import EFFECTS
from rigd_sim.plant import RigPlant

MIN = 60.0
Shown = dict[str, float]


def running(minutes: float = 20.0, reagent: bool = True) -> RigPlant:
    """The demonstration rig at 60 degC with 0.5 + 0.5 mL/min, reagents in the bed, outlet to the flask."""
    plant = RigPlant(two_pump_rig(), 5, EFFECTS)
    plant.tell("CH", Action.SET_TEMPERATURE, 60.0)
    plant.tell("CH", Action.CIRCULATE, 1.0)
    for name in ("V-A", "V-B"):
        plant.tell(name, Action.MOVE, float(reagent))
    plant.advance(2 * S_NS)
    for name in plant.pumps:
        plant.tell(name, Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    for name in plant.pumps:
        plant.tell(name, Action.DELIVER, 0.5)
    plant.tell("V-C", Action.MOVE, 1.0)
    on(plant, minutes * MIN)
    return plant


def on(plant: RigPlant, seconds: float) -> None:
    """Run on, refilling the standby syringes as a recipe would."""
    end = plant.now_ns + round(seconds * S_NS)
    while plant.now_ns < end:
        plant.advance(min(end, plant.now_ns + 10 * S_NS))
        for name, unit in plant.pumps.items():
            if unit.counted[unit.standby()] < 1e-7 and unit.filling < 0:
                plant.tell(name, Action.FILL, 5.0)


def shown(plant: RigPlant) -> Shown:
    """Mean of ten readings of all sensors, the feedback and the truth."""
    rows = [[r.value for r in plant.read("sensors", ["p1", "p2", "t1", "t2"])] for _ in range(10)]
    names = ("PT-1", "PT-2", "TT-1", "TT-2")
    return {**plant.truth(), **dict(zip(names, np.mean(rows, axis=0), strict=True))}
