"""Blocks, leaks and gas: what happens to the way of the liquid."""

from __future__ import annotations

import math

from rigd.ports.plant import FaultKind
from rigd_sim.faults import targets
from rigd_sim.physics.constants import BAR_PA, ML_M3, ML_MIN_M3_S
from rigd_sim.plant.ailments import FaultEffect, Situation
from rigd_sim.plant.levers import Levers

FLOW_PER_BAR = ML_MIN_M3_S / BAR_PA
BUBBLE_S = 2.0
CLOG_MIN_S = 60.0


def _scale(levers: Levers, situation: Situation, factor: float) -> None:
    for edge in targets.edges_through(situation.layout, situation.fault.target):
        levers.flow_factor[edge] = levers.flow_factor.get(edge, 1.0) * factor


def _block(levers: Levers, situation: Situation) -> None:
    _scale(levers, situation, max(0.0, 1.0 - situation.fault.magnitude))


def _clog(levers: Levers, situation: Situation) -> None:
    _scale(levers, situation, math.exp(-situation.fault.magnitude * situation.elapsed_s / CLOG_MIN_S))


def _leak(levers: Levers, situation: Situation) -> None:
    node = targets.leak_node(situation.layout, situation.fault.target)
    levers.leak[node] = levers.leak.get(node, 0.0) + situation.fault.magnitude * FLOW_PER_BAR


def _burst(levers: Levers, situation: Situation) -> None:
    node = targets.leak_node(situation.layout, situation.fault.target)
    levers.leak[node] = levers.leak.get(node, 0.0) + 1000.0 * situation.fault.magnitude * FLOW_PER_BAR


def _bubble(levers: Levers, situation: Situation) -> None:
    if situation.elapsed_s < BUBBLE_S:
        node = targets.leak_node(situation.layout, situation.fault.target)
        levers.air[node] = levers.air.get(node, 0.0) + situation.fault.magnitude * ML_M3 / BUBBLE_S


def _closed(levers: Levers, situation: Situation) -> None:
    levers.closed[situation.fault.target] = 0.0


EFFECTS = (
    FaultEffect(
        FaultKind("block", "sudden block", "line, column, regulator, valve, tee or cell", "blocked share, 0 to 1",
                  "pressures before it rise along a straight line, flow after it ends", ("H2", "H3")),
        targets.passages, _block,
    ),
    FaultEffect(
        FaultKind("clog", "slow clog", "line, column, regulator, valve, tee or cell",
                  "growth of resistance, e-folds per minute", "pressure before it creeps up at constant flow", ("H1",)),
        targets.passages, _clog,
    ),
    FaultEffect(
        FaultKind("leak", "leak to the floor", "any wetted part", "mL/min per bar",
                  "pressure low, less volume collected than pumped", ("H5",)),
        targets.wetted, _leak,
    ),
    FaultEffect(
        FaultKind("burst", "fitting off", "any wetted part", "size, 1 = 1000 mL/min per bar",
                  "pressure falls to nothing within a second", ("H6",)),
        targets.wetted, _burst,
    ),
    FaultEffect(
        FaultKind("bubble", "gas bubble enters", "any wetted part", "gas volume [mL]",
                  "spectrum spikes, pressure slow, residence time grows", ("H7",)),
        targets.wetted, _bubble,
    ),
    FaultEffect(
        FaultKind("closed", "vessel not vented", "flask or waste", "not used",
                  "pressure after the column creeps up at constant flow", ("H36", "H37")),
        targets.receivers, _closed,
    ),
)  # fmt: skip
