"""Kinds of fault and what each does to the plant's levers. Knows the plant, no bytes and no devices' protocols."""

from rigd_sim.faults.registry import EFFECTS, fault_kinds, fault_targets, make_plant

__all__ = ["EFFECTS", "fault_kinds", "fault_targets", "make_plant"]
