"""How the packing loses activity: with time and temperature, with turnover, and by leaching.

    da/dt = -kd exp(-Ed/R (1/T - 1/T_ref)) a          independent deactivation, first order (O. Levenspiel, Chemical
                                                      Reaction Engineering, 3rd ed., ch. 21; H. S. Fogler, ch. 10)
    da/dN = -a / N_e                                  N = mol converted per mol of active sites at the place; N_e = the
                                                      turnover number that leaves 1/e (the same law, counted in use)
    da/dV = -l a                                      V = liquid passed, in volumes of the liquid between the beads
                                                      (leaching; common practice, no source)

What is leached appears in the liquid as the species that the chemistry file names, as many mol as the packing loses in
sites; reactions in the liquid that have an order in it go on downstream of the bed.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rigd.model.chemistry import Reaction
from rigd_sim.physics.constants import GAS_CONSTANT_J_MOL_K, ZERO_CELSIUS_K
from rigd_sim.plant.packing import Bed

if TYPE_CHECKING:
    from rigd_sim.plant.contents import Contents

Places = NDArray[np.float64]


def age(contents: Contents, dt: float) -> None:
    """Take ``dt`` seconds of ageing off the activity of every place, and give what is leached to the liquid."""
    for bed in contents.beds.values():
        rows = slice(bed.start, bed.start + bed.cells)
        converted = contents.turnover[rows] - bed.turned
        bed.turned = contents.turnover[rows].copy()
        for j, reaction in enumerate(contents.kinetics.reactions):
            if not contents.kinetics.on_bed[j]:
                continue
            leached = reaction.leaching_per_volume * bed.passed(dt) / contents.layout.edges[bed.edge].volume
            lost = _with_time(reaction, contents.temperature[rows], dt) + _with_use(reaction, bed, converted) + leached
            if leached > 0.0 and reaction.leached_species:
                share = contents.base_activity[rows, j] / contents.fresh[rows, j]
                _release(contents, bed, reaction.leached_species, -np.expm1(-leached) * share)
            keep = np.exp(-lost)
            contents.base_activity[rows, j] *= keep
            contents.activity[rows, j] *= keep


def _with_time(reaction: Reaction, kelvin: Places, dt: float) -> Places:
    """kd dt at the temperature of each place."""
    if reaction.deactivation_per_h == 0.0:
        return np.zeros_like(kelvin)
    reference = reaction.reference_degC + ZERO_CELSIUS_K
    slope = reaction.deactivation_energy_kJ_mol * 1e3 / GAS_CONSTANT_J_MOL_K
    faster: Places = np.exp(-slope * (1.0 / kelvin - 1.0 / reference))
    return reaction.deactivation_per_h / 3600.0 * dt * faster


def _with_use(reaction: Reaction, bed: Bed, converted: Places) -> Places:
    """Turnovers of each place since the last time, over those that leave 1/e."""
    if reaction.deactivation_turnovers == 0.0 or bed.sites_mol == 0.0:
        return np.zeros_like(converted)
    return np.abs(converted) * bed.cells / bed.sites_mol / reaction.deactivation_turnovers


def _release(contents: Contents, bed: Bed, species: str, share: Places) -> None:
    """Give this share of the sites of each place to the liquid that passes it."""
    column = contents.species.index(species)
    slots = contents.slots(bed.edge)
    volume, fill = contents.cell_volume[bed.kernel], contents.fill[bed.kernel]
    head = fill / volume
    held = np.full(bed.cells + 1, volume)
    held[0], held[-1] = fill, volume - fill
    moles = np.zeros(bed.cells + 1)
    moles[:-1] += head * share
    moles[1:] += (1.0 - head) * share
    moles *= bed.sites_mol / bed.cells
    bed.leached_mol += float(moles.sum())
    filled = held > 0.0
    contents.cells[slots[filled], column] += moles[filled] / held[filled]
