"""Uses a plant once in every way before anyone is waiting for it.

A plant may compile its kernels when they are first used. That takes seconds on a new machine, and a server that stands
still for seconds looks to its master like a dead bus.
"""

from __future__ import annotations

import contextlib

from rigd.model.orders import Action
from rigd.model.rig import RigDefinition
from rigd.ports.plant import Plant

FILL_S, RUN_S = 60.0, 15.0


def warm_up(plant: Plant, rig: RigDefinition) -> None:
    """Fill and run all pumps, move all valves, heat all baths, read everything. The plant is of no use afterwards."""
    for pump in rig.pumps:
        plant.tell(pump.id, Action.FILL, pump.stroke_mL)
    plant.advance(round(FILL_S * 1e9))
    for pump in rig.pumps:
        plant.tell(pump.id, Action.SWAP, 0.0)
        plant.tell(pump.id, Action.FILL, pump.stroke_mL)
        plant.tell(pump.id, Action.DELIVER, pump.rate_max_mL_min / 2)
    for valve in rig.valves:
        plant.tell(valve.id, Action.MOVE, len(valve.positions) - 1)
    for chiller in rig.chillers:
        plant.tell(chiller.id, Action.SET_TEMPERATURE, chiller.high_degC)
        plant.tell(chiller.id, Action.CIRCULATE, 1.0)
    period_s = max((cell.period_ns for cell in rig.cells), default=0) / 1e9
    plant.advance(round((FILL_S + RUN_S + 2 * period_s) * 1e9))
    for device in rig.devices:
        plant.read(device.id, [channel.channel for channel in device.channels])
    for cell in rig.cells:
        with contextlib.suppress(LookupError):
            plant.spectrum(cell.device)
    plant.truth()
