"""The chemistry sheet as a table for the kernels, and the figures of each packed column."""

from __future__ import annotations

import numpy as np

from rigd.model.chemistry import RateLaw, Reaction, ReactionPlace
from rigd.model.rig import Column, RigDefinition
from rigd_sim.physics.constants import GAS_CONSTANT_J_MOL_K, ZERO_CELSIUS_K
from rigd_sim.physics.reaction import (
    DIFFUSIVITY,
    EA_OVER_R,
    EQUILIBRIUM,
    HEAD,
    HEAT,
    K_REF,
    LAW,
    LHHW,
    ON_BED,
    POWER,
    REVERSIBLE,
    T_REF,
)
from rigd_sim.physics.tubing import area

LAWS = {RateLaw.POWER: POWER, RateLaw.REVERSIBLE: REVERSIBLE, RateLaw.LHHW: LHHW}
ADSORPTION_BLOCK = 3
MMOL_MOL = 1e-3


class Kinetics:
    """The chemistry sheet as one table in mol, m3, s, K (columns: ``rigd_sim.physics.reaction``)."""

    def __init__(self, rig: RigDefinition) -> None:
        chemistry = rig.chemistry
        species = [s.id for s in chemistry.species]
        self.species = len(species)
        self.count = len(chemistry.reactions)
        self.table = np.zeros((self.count, HEAD + 4 * self.species))
        for r, reaction in enumerate(chemistry.reactions):
            row = self.table[r]
            row[K_REF], row[T_REF] = _rate_constant(reaction), reaction.reference_degC + ZERO_CELSIUS_K
            row[EA_OVER_R] = reaction.activation_energy_kJ_mol * 1e3 / GAS_CONSTANT_J_MOL_K
            row[HEAT], row[EQUILIBRIUM] = reaction.heat_kJ_mol * 1e3, _equilibrium(reaction)
            row[LAW], row[ON_BED] = LAWS[reaction.law], reaction.place is ReactionPlace.CATALYST
            blocks = (reaction.stoichiometry, reaction.orders, reaction.reverse_orders, reaction.adsorption_L_mol)
            for block, table in enumerate(blocks):
                for name, value in table.items():
                    column = HEAD + block * self.species + species.index(name)
                    row[column] = value * (1e-3 if block == ADSORPTION_BLOCK else 1.0)
        diffusivities = {s.id: s.diffusivity_m2_s for s in chemistry.species}
        for r, reaction in enumerate(chemistry.reactions):
            if reaction.diffusion_limits:
                used = [diffusivities[name] for name, nu in reaction.stoichiometry.items() if nu < 0]
                self.table[r, DIFFUSIVITY] = min(used)
        self.on_bed = self.table[:, ON_BED] != 0.0
        self.reactions = chemistry.reactions
        self.ages = any(
            r.deactivation_per_h or r.deactivation_turnovers or r.leaching_per_volume for r in chemistry.reactions
        )
        self.per_gram = [r.per_gram for r in chemistry.reactions]
        self.in_tubes = int(not self.on_bed.all())


def _rate_constant(reaction: Reaction) -> float:
    """From mol/L to mol/m3: r [mol/(m3 s)] = 1000 k prod (c/1000)^n."""
    return float(reaction.rate_constant * 1000.0 ** (1.0 - sum(reaction.orders.values())))


def _equilibrium(reaction: Reaction) -> float:
    """Equilibrium constant in powers of mol/m3, so that forward and reverse terms keep their ratio."""
    power = sum(reaction.reverse_orders.values()) - sum(reaction.orders.values())
    return float(reaction.equilibrium_constant * 1000.0**power)


class Bed:
    """One column's places: its edge in layout and kernel, first place, heat and exchange figures."""

    def __init__(self, column: Column, edge: int, kernel: int, start: int, cells: int) -> None:
        self.column, self.edge, self.kernel, self.start, self.cells = column, edge, kernel, start, cells
        bore, length = column.bore_mm * 1e-3, column.length_mm * 1e-3
        packing = column.packing
        self.section, self.length = area(bore), length
        self.bead_diameter = packing.bead_diameter_mm * 1e-3
        self.per_dx = 0.0  # open section over length of a cell
        self.dispersed_at = -1.0  # superficial velocity of the coefficients in force
        self.turned = np.zeros(cells)
        self.leached_mol = 0.0
        self.empty_volume = self.section * length
        self.bead_liquid = self.empty_volume * (1.0 - packing.voidage) * packing.bead_liquid_fraction
        self.solid = self.empty_volume * (1.0 - packing.voidage) * (1.0 - packing.bead_liquid_fraction)
        per_liquid = (1.0 - packing.voidage) / packing.voidage
        self.pore_size = (0.5 * self.bead_diameter) ** 2 / per_liquid / packing.pore_diffusion
        self.surface = 6.0 / self.bead_diameter * per_liquid  # of the beads, per volume of liquid between them
        self.sites_mol = packing.mass_g * packing.active_sites_mmol_g * MMOL_MOL
        self.solid_J_K = self.solid * 1.5e6 + column.wall_conductance_W_K * 2.0  # polymer, and the inner glass wall
        self.wet = 0.0
        self.swollen = 0.0
        self.voidage = packing.voidage

    def passed(self, dt: float) -> float:
        """Volume [m3] that passed at the velocity in force."""
        return max(self.dispersed_at, 0.0) * self.section * dt
