"""Species, liquids and reactions: what flows, how it absorbs and what it turns into."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum


@dataclass(frozen=True, slots=True)
class Band:
    """One Lorentzian absorption band: centre and full width at half height [1/cm], peak absorptivity [L/(mol cm)]."""

    centre_per_cm: float
    width_per_cm: float
    absorptivity: float


@dataclass(frozen=True, slots=True)
class Species:
    """One substance. ``bands`` may be empty (not seen by the cell). ``diffusivity_m2_s`` in the working solvent."""

    id: str
    name: str
    molar_mass_g_mol: float
    formula: str = ""
    bands: tuple[Band, ...] = ()
    diffusivity_m2_s: float = 1e-9


class RateLaw(StrEnum):
    """Form of the rate equation; ``physics/kinetics`` of the simulator holds the equations."""

    POWER = "power"
    REVERSIBLE = "reversible"
    LHHW = "lhhw"


class ReactionPlace(StrEnum):
    """Where a reaction runs: on the packing only, or wherever there is liquid."""

    CATALYST = "catalyst"
    LIQUID = "liquid"


@dataclass(frozen=True, slots=True)
class Reaction:
    """One reaction with its rate law.

    ``diffusion_limits``: the constant is the intrinsic one, pores and films slow it; else it is the apparent one.
    ``deactivation_turnovers``: mol converted per mol of sites that leave 1/e; ``leaching_per_volume``: part of the
    sites lost per volume of liquid between the beads that passes, found again as ``leached_species`` ("" = not seen).
    ``rate_constant`` is at ``reference_degC`` in mol, L and s of interstitial liquid (or per gram of catalyst when
    ``per_gram``), with the power of L/mol that ``orders`` ask for. ``stoichiometry`` is negative for what is used up.
    """

    id: str
    stoichiometry: Mapping[str, float]
    law: RateLaw
    place: ReactionPlace
    rate_constant: float
    reference_degC: float
    activation_energy_kJ_mol: float
    orders: Mapping[str, float]
    reverse_orders: Mapping[str, float] = field(default_factory=dict)
    equilibrium_constant: float = 0.0
    adsorption_L_mol: Mapping[str, float] = field(default_factory=dict)
    heat_kJ_mol: float = 0.0
    per_gram: bool = False
    deactivation_per_h: float = 0.0
    deactivation_energy_kJ_mol: float = 0.0
    deactivation_turnovers: float = 0.0
    leaching_per_volume: float = 0.0
    leached_species: str = ""
    diffusion_limits: bool = False


@dataclass(frozen=True, slots=True)
class Chemistry:
    """All of it, with the roles that the analysis needs: which species is converted and which is wanted."""

    name: str
    species: tuple[Species, ...]
    reactions: tuple[Reaction, ...]
    reactant: str
    product: str
    byproducts: tuple[str, ...] = ()
    invented: bool = True

    def species_by_id(self) -> dict[str, Species]:
        """Species keyed by id."""
        return {species.id: species for species in self.species}
