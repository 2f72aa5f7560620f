"""The simulated rig as one object: parts, flows, heat, reactions, instruments. No bytes, no wall clock, no fault
names."""

from rigd_sim.plant.rig_plant import RigPlant

__all__ = ["RigPlant"]
