"""Temperatures of packed beds and of the tubes between them.

Bed, one temperature per place (liquid and beads in equilibrium, closed ends, upwind, implicit):
    H dT_i/dt = rho cp Q (T_up - T_i) + conduction + g_wall (T_jacket - T_i) + g_end (T_room - T_end) + heat of reaction

Tube without a jacket: liquid that loses heat to the room on its way, T(x) = T_room + (T_in - T_room) exp(-NTU x/L),
NTU = U A/(rho cp Q) (balance of a plug with constant wall coefficient; any textbook of heat transfer). The tube holds
no heat of its own here: a change of inlet or flow is felt at once. That is right for liquid (residence seconds), early
by up to a minute for thick polymer walls. Where streams meet, temperatures mix in proportion to flow.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.bed import RELEASED, TEMPERATURE
from rigd_sim.physics.compiled import Floats, Ints, Row, compiled, inner

EDGE, PLACE, CELLS, STRETCH_ROWS = 0, 1, 2, 3
"""Rows of ``stretch`` (integers), one column per bed: its edge in ``ends``, its first row of ``place``, its cells."""
CAPACITY, CONDUCTION, WALL, END, JACKET, EXTRA, GIVEN, REACTED, OUTFLOW, LOST, MEAN, HEAT_ROWS = range(12)
"""Rows of ``heat``: J/K, W/K to the next place and W/K to the jacket per place, W/K of each end to the room; jacket
[K]; extra heat [W]; then what a step did: heat from the wall, of reaction, with the stream, from the room [J]; mean
[K]."""
TRANSFER, INLET, OUTLET, MIDDLE, SEEN, LINE_ROWS = 0, 1, 2, 3, 4, 5
"""Rows of ``line``: U A [W/K], negative for a bed; temperatures in, out and mean [K]; the mean that others last saw."""
SETTLED_K = 1e-4
SWEEPS = 60


@inner
def _heat_bed(
    b: int, p: int, n: int, dt: float, stream: float, inlet: float, room: float, heat: Floats, place: Floats,
    work: Floats,
) -> None:  # fmt: skip
    """Advance bed ``b``; ``stream`` = rho cp Q [W/K], negative when the liquid flows backward."""
    conduction, wall, ends, jacket = heat[CONDUCTION, b], heat[WALL, b], heat[END, b], heat[JACKET, b]
    forward = stream if stream > 0.0 else 0.0
    backward = -stream if stream < 0.0 else 0.0
    keep = heat[CAPACITY, b] / dt
    extra = heat[EXTRA, b] / n
    reacted = 0.0
    factor = 0.0
    for i in range(n):
        left = conduction if i > 0 else 0.0
        right = conduction if i < n - 1 else 0.0
        diagonal = keep + forward + backward + left + right + wall
        source = place[RELEASED, p + i] / dt + extra
        reacted += source * dt
        rhs = keep * place[TEMPERATURE, p + i] + wall * jacket + source
        place[RELEASED, p + i] = 0.0
        if i == 0:
            rhs += forward * inlet + ends * room
            diagonal += ends
        else:
            rhs += factor * (left + forward) * place[TEMPERATURE, p + i - 1]
            diagonal -= factor * (left + forward) * work[0, i - 1]
        if i == n - 1:
            rhs += backward * inlet + ends * room
            diagonal += ends
        work[0, i] = right + backward if i < n - 1 else 0.0
        factor = 1.0 / diagonal
        work[1, i] = factor
        place[TEMPERATURE, p + i] = rhs
    mean = 0.0
    for i in range(n - 1, -1, -1):
        above = place[TEMPERATURE, p + i + 1] if i < n - 1 else 0.0
        place[TEMPERATURE, p + i] = (place[TEMPERATURE, p + i] + work[0, i] * above) * work[1, i]
        mean += place[TEMPERATURE, p + i] / n
    first, last = place[TEMPERATURE, p], place[TEMPERATURE, p + n - 1]
    heat[GIVEN, b] = wall * n * (jacket - mean) * dt
    heat[REACTED, b] = reacted
    heat[OUTFLOW, b] = (forward * (inlet - last) + backward * (inlet - first)) * dt
    heat[LOST, b] = ends * (2.0 * room - first - last) * dt
    heat[MEAN, b] = mean


@inner
def _warm_lines(rho_cp: float, room: float, flow: Row, ends: Ints, line: Floats, node_t: Row, sums: Floats) -> float:
    """Temperatures of tubes and nodes from those of the beds, sweep by sweep along the flow."""
    for _ in range(SWEEPS):
        worst = 0.0
        sums[:, :] = 0.0
        for e in range(flow.shape[0]):
            down = ends[1, e] if flow[e] > 0.0 else ends[0, e]
            sums[0, down] += abs(flow[e])
            sums[1, down] += abs(flow[e]) * line[OUTLET, e]
        for i in range(node_t.shape[0]):
            t = sums[1, i] / sums[0, i] if sums[0, i] > 0.0 else room
            worst = max(worst, abs(t - node_t[i]))
            node_t[i] = t
        for e in range(flow.shape[0]):
            if line[TRANSFER, e] < 0.0:
                continue
            t = node_t[ends[0, e] if flow[e] > 0.0 else ends[1, e]] if flow[e] != 0.0 else room
            line[INLET, e] = t
            units = line[TRANSFER, e] / (rho_cp * abs(flow[e]) + 1e-12)
            keep = np.exp(-units)
            line[OUTLET, e] = room + (t - room) * keep
            line[MIDDLE, e] = room + (t - room) * ((1.0 - keep) / units if units > 1e-6 else 1.0)
        if worst < SETTLED_K:
            break
    changed = 0.0
    for e in range(flow.shape[0]):
        if line[TRANSFER, e] > 0.0:
            changed = max(changed, abs(line[MIDDLE, e] - line[SEEN, e]))
    return changed


@compiled
def heat_step(
    dt: float,
    rho_cp: float,
    room: float,
    flow: Row,
    ends: Ints,
    line: Floats,
    node_t: Row,
    stretch: Ints,
    heat: Floats,
    place: Floats,
    work: Floats,
    sums: Floats,
) -> float:
    """Advance all beds by ``dt`` at the mean flows [m3/s], then find the temperatures of tubes and nodes.

    Returns the largest difference between a mean temperature and the one last seen (row ``SEEN``) [K].
    """
    for b in range(stretch.shape[1]):
        e, p, n = stretch[EDGE, b], stretch[PLACE, b], stretch[CELLS, b]
        inlet = node_t[ends[0, e] if flow[e] >= 0.0 else ends[1, e]]
        _heat_bed(b, p, n, dt, rho_cp * flow[e], inlet, room, heat, place, work)
        line[INLET, e] = inlet
        line[OUTLET, e] = place[TEMPERATURE, p + n - 1 if flow[e] >= 0.0 else p]
        line[MIDDLE, e] = heat[MEAN, b]
    return _warm_lines(rho_cp, room, flow, ends, line, node_t, sums)
