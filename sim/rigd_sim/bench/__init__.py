"""The bench: plant and emulators behind real ports, in real or scaled time; the package's entry points.

No physics and no protocol lives here.
"""

from __future__ import annotations

from collections.abc import Sequence

from rigd.model.rig import RigDefinition
from rigd.ports.plant import FaultKind, PlantMaker, SimulatorMaker, SimulatorOptions
from rigd_sim.bench import server
from rigd_sim.emulators.assemble import emulated_lines
from rigd_sim.emulators.line_faults import LINE_KINDS
from rigd_sim.faults import fault_kinds, fault_targets, make_plant


def all_fault_kinds() -> Sequence[FaultKind]:
    """Faults of the plant, and those of lines and devices, which exist only where there are bytes."""
    return (*fault_kinds(), *LINE_KINDS)


def serve(rig: RigDefinition, options: SimulatorOptions) -> int:
    """Serve the rig until a signal ends it; returns the exit code."""
    return server.serve(rig, options, PLANT)


PLANT = PlantMaker("simulated", make_plant, fault_kinds, fault_targets)
SIMULATOR = SimulatorMaker("simulated", serve, emulated_lines, all_fault_kinds)
