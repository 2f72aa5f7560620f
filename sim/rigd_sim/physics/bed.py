"""The packed bed: liquid between the beads moves (a conveyor), beads, heat and activity stay where they are.

Place ``i`` of the bed (fixed) holds the part ``fill`` of slot ``i`` and the part ``v - fill`` of slot ``i + 1``.
Liquid inside beads exchanges with the liquid passing by at a linear driving force (E. Glueckauf, Trans. Faraday Soc. 51
(1955) 1540-1551: 15 De/R^2), solved exactly over the step. Reactions on the packing run in the moving liquid at the
temperature and activity of the place (rate constants are per litre of interstitial liquid).
Their heat is in ``warmth``. A species that the packing retains has a larger capacity there: linear isotherm, q = K c
per volume of solid, so its front is slowed by 1 + (1-e)/e (f + (1-f) K) (balance; E. Glueckauf 1955 for the rate).
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, inner
from rigd_sim.physics.diffusion import left_by_diffusion
from rigd_sim.physics.reaction import DIFFUSIVITY, EA_OVER_R, HEAT, K_REF, ON_BED, T_REF, react

TEMPERATURE, RELEASED, TURNOVER, PLACE_ROWS = 0, 1, 2, 3
"""Rows of the table ``place`` [K, J since the last heat step, mol since the start]."""
LIQUID, RATE, SIZE, FILM, HOLD = 0, 1, 2, 3, 4
"""Rows of the table ``bed_rate``: liquid inside the beads of a place [m3], exchange with it [1/s], R^2 e/(1-e) over the
pores' share of diffusivity [m2], film coefficient times surface per volume [1/s]; then, for each column of a
composition, what the beads of a place hold of it over its concentration in their liquid [m3]."""


@inner
def exchange_beads(
    cells: Floats,
    s: int,
    n: int,
    v: float,
    fill: float,
    beads: Floats,
    p: int,
    bed_rate: Floats,
    b: int,
    dt: float,
    species: int,
    work: Floats,
) -> None:
    """Exchange between moving liquid and the beads of bed ``b`` over ``dt``; ``p`` is the row of the first place.

    The last column is gas, which stays outside; where it is, only the wet share of the beads takes part. Each slot
    gives in proportion to what it has in the place, so nothing can become negative. ``work[0]`` is scratch.
    """
    columns = cells.shape[1] - 1
    for k in range(columns):
        hold = bed_rate[HOLD + k, b]
        work[0, k] = 0.0
        if hold > 0.0:
            liquid = bed_rate[LIQUID, b]
            k_dt = bed_rate[RATE, b] * dt * (liquid / hold if liquid > 0.0 else 1.0)
            work[0, k] = hold * v / (hold + v) * (1.0 - np.exp(-k_dt * (1.0 + hold / v)))
    head = fill / v
    for i in range(n):
        held_up = fill if i == 0 else v
        held_down = v - fill if i == n - 1 else v
        wet = 0.0
        for k in range(species, columns):
            wet += head * cells[s + i, k] + (1.0 - head) * cells[s + i + 1, k]
        for k in range(columns):
            up = cells[s + i, k]
            mean = head * up + (1.0 - head) * cells[s + i + 1, k]
            moved = work[0, k] * (mean - wet * beads[p + i, k])
            if moved == 0.0:
                continue
            beads[p + i, k] += moved / bed_rate[HOLD + k, b]
            part_up = head * up / mean if moved > 0.0 else head
            if held_up > 0.0:
                cells[s + i, k] -= moved * part_up / held_up
            if held_down > 0.0:
                cells[s + i + 1, k] -= moved * (1.0 - part_up) / held_down


@inner
def react_bed(
    cells: Floats,
    s: int,
    n: int,
    v: float,
    fill: float,
    dt: float,
    p: int,
    place: Floats,
    activity: Floats,
    kin: Floats,
    species: int,
    size: float,
    film: float,
    work: Floats,
) -> None:
    """React every slot for ``dt``; heat [J] and turned-over mol are added to the rows of ``place``.

    ``activity`` has one row per place and one column per reaction (1 for those that need no packing).
    """
    head = fill / v
    for j in range(n + 1):
        before = p + (j - 1 if j > 0 else 0)
        after = p + (j if j < n else n - 1)
        held = fill if j == 0 else (v - fill if j == n else v)
        if held <= 0.0:
            continue
        w = head if 0 < j < n else (1.0 if j == 0 else 0.0)  # share of the slot that lies in the place ``after``
        t = (1.0 - w) * place[TEMPERATURE, before] + w * place[TEMPERATURE, after]
        for r in range(kin.shape[0]):
            act = (1.0 - w) * activity[before, r] + w * activity[after, r]
            work[5, r] = kin[r, K_REF] * act * np.exp(-kin[r, EA_OVER_R] * (1.0 / t - 1.0 / kin[r, T_REF]))
            if kin[r, DIFFUSIVITY] > 0.0:
                work[5, r] *= left_by_diffusion(cells, s + j, kin, r, species, work[5, r], size, film, work)
        react(cells, s + j, dt, kin, species, work)
        for r in range(kin.shape[0]):
            turned = work[6, r] * held
            place[RELEASED, before] -= (1.0 - w) * kin[r, HEAT] * turned
            place[RELEASED, after] -= w * kin[r, HEAT] * turned
            if kin[r, ON_BED] != 0.0:
                place[TURNOVER, before] += (1.0 - w) * turned
                place[TURNOVER, after] += w * turned
