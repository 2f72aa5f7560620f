"""Blocks, leaks, gas and vessels: what happens to the way of the liquid."""

from __future__ import annotations

import math

from rigd_sim.faults import targets
from rigd_sim.faults.build import effect
from rigd_sim.physics.constants import BAR_PA, ML_M3, ML_MIN_M3_S
from rigd_sim.plant.ailments import Situation
from rigd_sim.plant.levers import Levers

FLOW_PER_BAR = ML_MIN_M3_S / BAR_PA
BUBBLE_S = 2.0
MINUTE_S = 60.0
BURST_ML_MIN_BAR = 1000.0
PASSAGE = "line, column, regulator, valve, tee or cell"


def _scale(levers: Levers, situation: Situation, factor: float) -> None:
    for edge in targets.edges_through(situation.layout, situation.fault.target):
        levers.flow_factor[edge] = levers.flow_factor.get(edge, 1.0) * factor


def _block(levers: Levers, situation: Situation) -> None:
    _scale(levers, situation, max(0.0, 1.0 - situation.fault.magnitude))


def _clog(levers: Levers, situation: Situation) -> None:
    _scale(levers, situation, math.exp(-situation.fault.magnitude * situation.elapsed_s / MINUTE_S))


def _collapse(levers: Levers, situation: Situation) -> None:
    _scale(levers, situation, 1.0 / max(situation.fault.magnitude, 1.0))


def _open(levers: Levers, edge: int, mL_min_bar: float) -> None:
    levers.conductance[edge] = levers.conductance.get(edge, 0.0) + mL_min_bar * FLOW_PER_BAR


def _leak(levers: Levers, situation: Situation) -> None:
    node = targets.leak_node(situation.layout, situation.fault.target)
    _open(levers, situation.layout.leak_edge[node], situation.fault.magnitude)


def _burst(levers: Levers, situation: Situation) -> None:
    node = targets.leak_node(situation.layout, situation.fault.target)
    _open(levers, situation.layout.leak_edge[node], BURST_ML_MIN_BAR * situation.fault.magnitude)


def _channelling(levers: Levers, situation: Situation) -> None:
    _open(levers, situation.layout.edge_index[f"{situation.fault.target}.bypass"], situation.fault.magnitude)


def _backflow(levers: Levers, situation: Situation) -> None:
    _open(levers, situation.layout.edge_index[f"{situation.fault.target}.back"], situation.fault.magnitude)


def _gas(levers: Levers, situation: Situation, m3_s: float) -> None:
    node = targets.leak_node(situation.layout, situation.fault.target)
    levers.air[node] = levers.air.get(node, 0.0) + m3_s


def _bubble(levers: Levers, situation: Situation) -> None:
    if situation.elapsed_s < BUBBLE_S:
        _gas(levers, situation, situation.fault.magnitude * ML_M3 / BUBBLE_S)


def _outgassing(levers: Levers, situation: Situation) -> None:
    _gas(levers, situation, situation.fault.magnitude * ML_MIN_M3_S)


def _closed(levers: Levers, situation: Situation) -> None:
    levers.closed.add(situation.fault.target)


def _small(levers: Levers, situation: Situation) -> None:
    levers.capacity[situation.fault.target] = situation.fault.magnitude * ML_M3


def _empty(levers: Levers, situation: Situation) -> None:
    levers.bottle_empty.add(situation.fault.target)


def _siphon(levers: Levers, situation: Situation) -> None:
    levers.head_Pa[situation.fault.target] = situation.fault.magnitude * BAR_PA


EFFECTS = (
    effect("block", "sudden block", targets.passages, PASSAGE, "blocked share, 0 to 1", _block,
           "pressures before it rise on a straight line, dP/dt = Q/C; flow after it ends", "H2 H3 H37"),
    effect("clog", "slow clog", targets.passages, PASSAGE, "growth of resistance, e-folds per minute", _clog,
           "pressure before it creeps up at constant flow, after it stays", "H1"),
    effect("collapse", "gel bed pressed together", targets.columns, "column", "resistance factor, 1 or more", _collapse,
           "pressure before the column steps up, in proportion to flow", "H1"),
    effect("leak", "leak to the floor", targets.wetted, "any wetted part", "mL/min per bar", _leak,
           "pressure low, less volume collected than pumped, floor wet", "H5"),
    effect("burst", "fitting off", targets.wetted, "any wetted part", "size, 1 = 1000 mL/min per bar", _burst,
           "pressure falls to nothing within a second", "H6"),
    effect("channelling", "liquid passes beside the beads", targets.columns, "column", "bypass, mL/min per bar",
           _channelling, "conversion and pressure drop fall together", "H1"),
    effect("backflow", "outlet check valve leaks", targets.pumps, "pump", "mL/min per bar", _backflow,
           "flow short under pressure, liquid runs back when the pump stands", "H8 H13"),
    effect("bubble", "one gas bubble enters", targets.wetted, "any wetted part", "gas volume [mL]", _bubble,
           "pressure slow (compliance V/P), spectrum spikes, residence time grows", "H7"),
    effect("outgassing", "gas comes out of solution", targets.wetted, "any wetted part", "gas [mL/min]", _outgassing,
           "spectrum base line jumps, pressure slow, flow at the outlet high", "H7"),
    effect("closed", "vessel not vented", targets.vessels, "vessel", "not used", _closed,
           "receiver: pressure after the column creeps up, P V constant; bottle: refill falls short", "H10 H36"),
    effect("small-flask", "smaller vessel than declared", targets.receivers, "flask or waste", "capacity [mL]", _small,
           "overflow: floor wet, volume of the vessel stands", "H35"),
    effect("bottle-empty", "dip tube draws air", targets.supplies, "bottle", "not used", _empty,
           "refill brings gas: pressure slow to rise, spectrum spikes", "H11"),
    effect("siphon", "vessel stands higher or lower", targets.vessels, "vessel", "pressure of its height [bar]",
           _siphon, "liquid runs by itself while pumps stand", "H4"),
)  # fmt: skip
