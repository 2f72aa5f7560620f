"""A short way to write one line of the table of kinds."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from rigd.model.rig import RigDefinition
from rigd.ports.plant import FaultKind
from rigd_sim.plant.ailments import FaultEffect, Situation
from rigd_sim.plant.levers import Levers


def effect(
    kind: str,
    title: str,
    allowed: Callable[[RigDefinition], Sequence[str]],
    target: str,
    magnitude: str,
    apply: Callable[[Levers, Situation], None],
    signals: str,
    hazards: str,
) -> FaultEffect:
    """``hazards`` are numbers of the hazard list, separated by blanks."""
    return FaultEffect(FaultKind(kind, title, target, magnitude, signals, tuple(hazards.split())), allowed, apply)
