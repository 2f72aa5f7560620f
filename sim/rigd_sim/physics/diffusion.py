"""What diffusion leaves of a rate on the packing: pores inside the beads, and the film around them.

    eta   = 3/phi^2 (phi coth phi - 1),  phi = R sqrt(kv / De)  (sphere; E. W. Thiele, Ind. Eng. Chem. 31 (1939) 916)
    kv    = (n + 1)/(2 n) * (-dr/dxi) per litre of bead         (generalised modulus; R. Aris 1957, K. B. Bischoff 1965)
    film  : kc a xi_surface = eta r(at the surface)             (k_c: E. J. Wilson, C. J. Geankoplis 1966)

xi is the extent from the liquid to the surface of the bead, n the order in the reactant that would run out first. Exact
for first-order and for first-order reversible kinetics; within a few per cent for other power laws (the generalised
modulus joins the limits of slow and fast reaction). A rate that rises with conversion counts as one of order zero.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, inner
from rigd_sim.physics.reaction import DIFFUSIVITY, HEAD, law

SMALL = 1e-4
"""Part of the limiting reactant over which the slope of the rate is taken."""
ROUNDS = 6
UNFELT = 1e-3


@inner
def sphere(thiele: float) -> float:
    """Effectiveness factor of a sphere, first order, by the modulus R sqrt(k/De)."""
    if thiele < UNFELT:
        return 1.0 - thiele * thiele / 15.0
    share: float = 3.0 / (thiele * thiele) * (thiele / np.tanh(thiele) - 1.0)
    return share


@inner
def _limiting(c: Floats, i: int, kin: Floats, r: int, species: int) -> int:
    """The reactant that would run out first; -1 when nothing is used up."""
    best = -1
    least = 0.0
    for j in range(species):
        nu = kin[r, HEAD + j]
        if nu < 0.0:
            room = c[i, j] / -nu
            if best < 0 or room < least:
                best = j
                least = room
    return best


@inner
def _moved(c: Floats, i: int, kin: Floats, r: int, species: int, extent: float, work: Floats) -> None:
    """work[4] = composition after this extent of reaction ``r``."""
    for j in range(species):
        work[4, j] = c[i, j] + kin[r, HEAD + j] * extent


@inner
def left_by_diffusion(
    c: Floats, i: int, kin: Floats, r: int, species: int, k: float, size: float, film: float, work: Floats
) -> float:
    """Observed over intrinsic rate of reaction ``r`` in the liquid of row ``i``; ``k`` is its rate constant there.

    ``size`` = R^2 e/(1-e) over the pores' share of free diffusivity [m2] (rates are per litre between the beads),
    ``film`` = k_c times the surface of the beads per volume of that liquid [1/s]. Scratch: ``work[4]``.
    """
    key = _limiting(c, i, kin, r, species)
    if key < 0 or c[i, key] <= 0.0:
        return 1.0
    room = c[i, key] / -kin[r, HEAD + key]
    order = kin[r, HEAD + species + key]
    bulk = k * law(c, i, kin, r, species)
    if bulk <= 0.0:
        return 1.0
    extent = 0.0
    share = 1.0
    for _ in range(ROUNDS):
        _moved(c, i, kin, r, species, extent, work)
        rate = k * law(work, 4, kin, r, species)
        step = SMALL * (room - extent)
        _moved(c, i, kin, r, species, extent + step, work)
        slope = (rate - k * law(work, 4, kin, r, species)) / step
        if order > 0.0 and slope > 0.0:
            modulus = slope * (order + 1.0) / (2.0 * order)
        else:
            modulus = 0.5 * rate / (room - extent)
        share = sphere(np.sqrt(size * modulus / kin[r, DIFFUSIVITY]))
        miss = film * extent - share * rate
        change = miss / (film + share * max(slope, 0.0))
        extent = min(max(extent - change, 0.0), 0.9999 * room)
        if abs(change) < 1e-9 * room:
            break
    return film * extent / bulk
