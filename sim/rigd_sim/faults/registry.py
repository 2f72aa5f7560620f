"""All kinds in one table, in the order in which they are listed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rigd.model.rig import RigDefinition
from rigd.ports.plant import FaultKind, Plant
from rigd_sim.faults import drives, process, signals, wetted
from rigd_sim.plant import RigPlant
from rigd_sim.plant.ailments import FaultEffect

_ALL = (*wetted.EFFECTS, *drives.EFFECTS, *signals.EFFECTS, *process.EFFECTS)
EFFECTS: Mapping[str, FaultEffect] = {effect.kind.kind: effect for effect in _ALL}


def fault_kinds() -> Sequence[FaultKind]:
    """Every kind of fault that a plant can be given."""
    return tuple(effect.kind for effect in EFFECTS.values())


def make_plant(rig: RigDefinition, seed: int) -> Plant:
    """The simulated plant of a rig, with all fault kinds."""
    return RigPlant(rig, seed, EFFECTS)


def fault_targets(rig: RigDefinition, kind: str) -> Sequence[str]:
    """What a kind of fault can hit in this rig."""
    return tuple(EFFECTS[kind].targets(rig))
