"""The packed bed: liquid between the beads moves (a conveyor), beads, heat and activity stay where they are.

Place ``i`` of the bed (fixed) holds the part ``fill`` of slot ``i`` and the part ``v - fill`` of slot ``i + 1``.
Liquid inside beads exchanges with the liquid passing by at a linear driving force (E. Glueckauf, Trans. Faraday Soc. 51
(1955) 1540-1551: 15 De/R^2), solved exactly over the step. Reactions on the packing run in the moving liquid at the
temperature and activity of the place (rate constants are per litre of interstitial liquid).
Their heat is in ``warmth``.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, inner
from rigd_sim.physics.reaction import EA_OVER_R, HEAT, K_REF, ON_BED, T_REF, react

TEMPERATURE, RELEASED, TURNOVER, PLACE_ROWS = 0, 1, 2, 3
"""Rows of the table ``place`` [K, J since the last heat step, mol since the start]."""


@inner
def exchange_beads(
    cells: Floats, s: int, n: int, v: float, fill: float, beads: Floats, p: int, bead: float, k_dt: float
) -> None:
    """Exchange between moving liquid and the liquid inside beads; ``bead`` is bead liquid per place [m3].

    ``k_dt`` = mass transfer coefficient per bead liquid times the step; ``p`` is the row of the first place. The last
    column is gas, which stays outside. Each slot gives in proportion to what it has in the place, so nothing can
    become negative.
    """
    if bead <= 0.0:
        return
    head = fill / v
    share = bead * v / (bead + v) * (1.0 - np.exp(-k_dt * (1.0 + bead / v)))
    for i in range(n):
        held_up = fill if i == 0 else v
        held_down = v - fill if i == n - 1 else v
        for k in range(cells.shape[1] - 1):
            up = cells[s + i, k]
            mean = head * up + (1.0 - head) * cells[s + i + 1, k]
            moved = share * (mean - beads[p + i, k])
            if moved == 0.0:
                continue
            beads[p + i, k] += moved / bead
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
        react(cells, s + j, dt, kin, species, work)
        for r in range(kin.shape[0]):
            turned = work[6, r] * held
            place[RELEASED, before] -= (1.0 - w) * kin[r, HEAT] * turned
            place[RELEASED, after] -= w * kin[r, HEAT] * turned
            if kin[r, ON_BED] != 0.0:
                place[TURNOVER, before] += (1.0 - w) * turned
                place[TURNOVER, after] += w * turned
