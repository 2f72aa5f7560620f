"""Priming and flushing: doses of liquid through every line, to waste."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from rigd.logic.conduct.doses import Dose, Dosing, dose_all, dose_due_ns, left_s
from rigd.logic.conduct.layout import liquid_of
from rigd.logic.conduct.shares import flush_doses, prime_doses, solvent_flows
from rigd.logic.conduct.wants import Move, Scene, Wants


@dataclass(frozen=True, slots=True)
class Memory:
    """Progress of each pump through its doses."""

    pumps: Mapping[str, Dosing] = field(default_factory=dict)


def prime(scene: Scene, memory: Memory) -> Move[Memory]:
    """Solvent through all, reagent into its supply lines, solvent after. The bath already goes to its temperature."""
    recipe = scene.layout.recipe
    assert recipe.prime is not None, "a prime phase without a prime table"
    doses = prime_doses(scene.layout, recipe.prime)
    warm = recipe.conditioning.temperature_degC if recipe.conditioning else None
    return _dosed(scene, memory, doses, solvent_flows(scene.layout, recipe.prime.total_mL_min), warm)


def flush(scene: Scene, memory: Memory) -> Move[Memory]:
    """Solvent through all. The bath is led to the flush temperature once no pump delivers reagent any more."""
    recipe = scene.layout.recipe
    doses = flush_doses(scene.layout, recipe.flush)
    on_solvent = all(liquid_of(scene.tracks[name].active) == liquid_of(row[0].label) for name, row in doses.items())
    temperature = recipe.flush.temperature_degC if on_solvent else None
    return _dosed(scene, memory, doses, solvent_flows(scene.layout, recipe.flush.total_mL_min), temperature)


def _dosed(
    scene: Scene,
    memory: Memory,
    doses: Mapping[str, Sequence[Dose]],
    flows: Mapping[str, float],
    temperature_degC: float | None,
) -> Move[Memory]:
    pumps, wants, done = dose_all(scene, doses, memory.pumps, flows)
    labels = sorted({liquid_of(want.label) for want in wants.values() if want.flow_mL_min > 0})
    return Move(
        Memory(pumps),
        Wants(wants, outlet=scene.layout.recipe.collect.waste_position, temperature_degC=temperature_degC),
        step=" and ".join(labels),
        done=done,
        due_ns=dose_due_ns(scene, doses, pumps, flows),
        left_s=left_s(scene, doses, pumps, flows),
    )
