"""The packed bed: liquid between the beads moves (a conveyor), beads, heat and activity stay where they are.

Cell ``i`` of the bed (fixed) holds the part ``fill`` of slot ``i`` and the part ``v - fill`` of slot ``i + 1``.
Liquid inside beads
exchanges with the liquid passing by at a linear driving force (E. Glueckauf, Trans. Faraday Soc. 51 (1955) 1540-1551:
15 De/R^2), solved exactly over the step. Reactions on the packing run in the moving liquid at the temperature and
activity of the
place (rate constants are per litre of interstitial liquid).

Heat, one temperature per place (liquid and beads in equilibrium, closed ends, upwind in the direction of flow,
implicit):
    H_i dT_i/dt = rho cp Q (T_up - T_i) + (axial conduction) + g_wall (T_jacket - T_i) + g_end (T_room - T_end) +
    heat of reaction
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, Ints, compiled
from rigd_sim.physics.reaction import react


@compiled
def exchange_beads(cells: Floats, beads: Floats, n: int, v: float, fill: float, bead: float, k_dt: float) -> None:
    """Exchange between moving liquid and the liquid inside beads; ``bead`` is bead liquid per cell [m3].

    ``k_dt`` = mass transfer coefficient per bead liquid times the step. The last column is gas, which stays outside.
    """
    if bead <= 0.0:
        return
    width = cells.shape[1] - 1
    head = fill / v
    share = bead * v / (bead + v) * (1.0 - np.exp(-k_dt * (1.0 + bead / v)))
    for i in range(n):
        for k in range(width):
            up, down = cells[i, k], cells[i + 1, k]
            mean = head * up + (1.0 - head) * down
            moved = share * (mean - beads[i, k])
            if moved == 0.0:
                continue
            beads[i, k] += moved / bead
            # slot capacities: only the part of each slot that lies in this cell takes part
            held_up = fill if i == 0 else v
            held_down = v - fill if i == n - 1 else v
            if moved > 0.0:
                part_up = head * up / mean
            else:
                part_up = head
            if held_up > 0.0:
                cells[i, k] = up - moved * part_up / held_up
            if held_down > 0.0:
                cells[i + 1, k] = down - moved * (1.0 - part_up) / held_down


@compiled
def react_bed(
    cells: Floats,
    n: int,
    v: float,
    fill: float,
    dt: float,
    temperature: Floats,
    activity: Floats,
    nu: Floats,
    k_ref: Floats,
    t_ref: Floats,
    ea_over_r: Floats,
    on_bed: Ints,
    law: Ints,
    orders: Floats,
    reverse: Floats,
    equilibrium: Floats,
    adsorption: Floats,
    heat: Floats,
    released: Floats,
    turnover: Floats,
    work: Floats,
) -> None:
    """React every slot for ``dt``; heat [J] goes to ``released`` per place, turned-over mol to ``turnover``.

    ``activity`` has one row per place and one column per reaction (1 for those that need no packing).
    """
    reactions = k_ref.shape[0]
    head = fill / v
    k = np.empty(reactions)
    extent = np.empty(reactions)
    for j in range(n + 1):
        before, after = max(j - 1, 0), min(j, n - 1)
        held = fill if j == 0 else (v - fill if j == n else v)
        if held <= 0.0:
            continue
        w = head if 0 < j < n else (1.0 if j == 0 else 0.0)  # share of the slot that lies in the place ``after``
        t = (1.0 - w) * temperature[before] + w * temperature[after]
        for r in range(reactions):
            act = (1.0 - w) * activity[before, r] + w * activity[after, r]
            k[r] = k_ref[r] * act * np.exp(-ea_over_r[r] * (1.0 / t - 1.0 / t_ref[r]))
        react(cells[j], dt, nu, k, law, orders, reverse, equilibrium, adsorption, extent, work)
        for r in range(reactions):
            joule = -heat[r] * extent[r] * held
            released[before] += (1.0 - w) * joule
            released[after] += w * joule
            if on_bed[r]:
                turnover[before] += (1.0 - w) * extent[r] * held
                turnover[after] += w * extent[r] * held


@compiled
def heat_bed(
    temperature: Floats,
    dt: float,
    capacity: float,
    stream: float,
    inlet: float,
    conduction: float,
    wall: float,
    jacket: float,
    ends: float,
    room: float,
    released: Floats,
    work: Floats,
) -> float:
    """Advance bed temperatures by ``dt``; return the heat that the wall gave to the bed [J].

    ``capacity`` J/K, ``conduction`` W/K between neighbours, ``wall`` W/K to the jacket are per place; ``stream`` =
    rho cp Q [W/K],
    negative when the liquid flows backward; ``ends`` W/K to the room at the first and last place.
    """
    n = temperature.shape[0]
    lower = work[0, :n]
    diagonal = work[1, :n]
    upper = work[2, :n]
    for i in range(n):
        forward, backward = max(stream, 0.0), max(-stream, 0.0)
        left = conduction if i > 0 else 0.0
        right = conduction if i < n - 1 else 0.0
        diagonal[i] = capacity / dt + forward + backward + left + right + wall
        rhs = capacity / dt * temperature[i] + wall * jacket + released[i] / dt
        lower[i], upper[i] = -(left + forward), -(right + backward)
        if i == 0:
            lower[i] = 0.0
            rhs += forward * inlet + ends * room
            diagonal[i] += ends
        if i == n - 1:
            upper[i] = 0.0
            rhs += backward * inlet + ends * room
            diagonal[i] += ends
        temperature[i] = rhs
    for i in range(1, n):
        factor = lower[i] / diagonal[i - 1]
        diagonal[i] -= factor * upper[i - 1]
        temperature[i] -= factor * temperature[i - 1]
    temperature[n - 1] /= diagonal[n - 1]
    for i in range(n - 2, -1, -1):
        temperature[i] = (temperature[i] - upper[i] * temperature[i + 1]) / diagonal[i]
    given = 0.0
    for i in range(n):
        given += wall * (jacket - temperature[i]) * dt
        released[i] = 0.0
    return given
