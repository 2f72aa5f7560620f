"""Pressures in a network of nodes with compliance, joined by passive edges.

    C_i dP_i/dt = q_i - sum_e Q_e,     Q_e = G_e (P_a - P_b)           (tube, bed: G = 1/resistance)
                                       Q_e = G_e (P_a - P_b - crack)   (check valve, back-pressure regulator: never < 0)
                                       Q_e = G_e (P_a - P_b - bias)    (relief valve once open; it opens at crack,
                                                                        shuts at a lower pressure, bias below that)

Integrated by the two-stage, stiffly accurate, L-stable diagonally implicit Runge-Kutta method with gamma =
1 - 1/sqrt(2) (R. Alexander, SIAM J. Numer. Anal. 14 (1977) 1006-1021). Stages and volumes use the same flows, so liquid
is conserved to rounding at any step; the step is shortened until the two stages agree to the tolerance. A dead-headed
pump gives exactly dP/dt = Q/C. Any coherent units; the plant uses Pa, m3, s.

Tables instead of many arrays keep the just-in-time compiler quick. Rows of ``node``: see ``PRESSURE`` .. ``BASE``; of
``edge``: ``CONDUCTANCE`` .. ``VOLUME``; of ``link`` (integers): ``FROM`` .. ``TRIED``.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, IntRow, Ints, compiled, inner

PRESSURE, COMPLIANCE, SOURCE, PEAK, CAPACITY, BASE, FIRST, SECOND, NODE_ROWS = 0, 1, 2, 3, 4, 5, 6, 7, 8
CONDUCTANCE, CRACK, SHUT, BIAS, VOLUME, EDGE_ROWS = 0, 1, 2, 3, 4, 5
FROM, TO, OPEN, OPEN_FIRST, OPEN_SECOND, LINK_ROWS = 0, 1, 2, 3, 4, 5
LAG, SHOWN, SENSOR_ROWS = 0, 1, 2

GAMMA = 1.0 - 0.5**0.5
TOLERANCE_PA = 100.0
TOLERANCE_RELATIVE = 5e-4
SMALLEST_STEP_S = 1e-4


@inner
def _assemble(matrix: Floats, node: Floats, edge: Floats, link: Ints, ground: IntRow, state: int, out: int) -> None:
    """Fill the stage matrix C/(gamma h) + L and the right side in row ``out``; a ground node keeps its pressure."""
    nodes = ground.shape[0]
    for i in range(nodes):
        for j in range(nodes):
            matrix[i, j] = 0.0
        if ground[i]:
            matrix[i, i] = 1.0
            node[out, i] = node[PRESSURE, i]
        else:
            matrix[i, i] = node[CAPACITY, i]
            node[out, i] = node[CAPACITY, i] * node[BASE, i] + node[SOURCE, i]
    for e in range(edge.shape[1]):
        g = edge[CONDUCTANCE, e]
        crack = edge[CRACK, e]
        if g == 0.0 or (crack >= 0.0 and not link[state, e]):
            continue
        a = link[FROM, e]
        b = link[TO, e]
        push = g * edge[BIAS, e] if crack > 0.0 else 0.0
        if not ground[a]:
            matrix[a, a] += g
            matrix[a, b] -= g
            node[out, a] += push
        if not ground[b]:
            matrix[b, b] += g
            matrix[b, a] -= g
            node[out, b] -= push


@inner
def _solve(matrix: Floats, node: Floats, out: int) -> None:
    """Gaussian elimination in place without pivoting: the matrix is diagonally dominant by construction."""
    n = matrix.shape[0]
    for k in range(n):
        pivot = 1.0 / matrix[k, k]
        for i in range(k + 1, n):
            factor = matrix[i, k] * pivot
            if factor != 0.0:
                for j in range(k + 1, n):
                    matrix[i, j] -= factor * matrix[k, j]
                node[out, i] -= factor * node[out, k]
    for i in range(n - 1, -1, -1):
        for j in range(i + 1, n):
            node[out, i] -= matrix[i, j] * node[out, j]
        node[out, i] /= matrix[i, i]


@inner
def _stage(matrix: Floats, node: Floats, edge: Floats, link: Ints, ground: IntRow, state: int, out: int) -> None:
    """One implicit stage; valves that open or shut by pressure are iterated until their state fits the answer."""
    for _ in range(6):
        _assemble(matrix, node, edge, link, ground, state, out)
        _solve(matrix, node, out)
        changed = 0
        for e in range(edge.shape[1]):
            if edge[CRACK, e] >= 0.0:
                limit = edge[SHUT, e] if link[state, e] else edge[CRACK, e]
                wanted = 1 if node[out, link[FROM, e]] - node[out, link[TO, e]] > limit else 0
                if wanted != link[state, e]:
                    link[state, e] = wanted
                    changed = 1
        if not changed:
            return


@inner
def _flow(node: Floats, edge: Floats, link: Ints, e: int, row: int, state: int) -> float:
    """Flow through edge ``e`` at the pressures of ``row``, in the linear branch that was assumed."""
    drop = node[row, link[FROM, e]] - node[row, link[TO, e]]
    if edge[CRACK, e] >= 0.0:
        drop = drop - edge[BIAS, e] if link[state, e] else 0.0
    return float(edge[CONDUCTANCE, e] * drop)


@inner
def _accept(node: Floats, edge: Floats, link: Ints, sensor: Floats, sensor_node: IntRow, h: float) -> float:
    """Book the volumes of a step of ``h``, let sensors follow (exact on a straight line), take the new pressures.

    Returns the largest slope [Pa/s] or lag of a reading [Pa].
    """
    restless = 0.0
    for e in range(edge.shape[1]):
        first = _flow(node, edge, link, e, FIRST, OPEN_FIRST)
        second = _flow(node, edge, link, e, SECOND, OPEN_SECOND)
        edge[VOLUME, e] += h * ((1.0 - GAMMA) * first + GAMMA * second)
        link[OPEN, e] = link[OPEN_SECOND, e]
    for s in range(sensor_node.shape[0]):
        p0 = node[PRESSURE, sensor_node[s]]
        p1 = node[SECOND, sensor_node[s]]
        lag = sensor[LAG, s]
        behind = (p1 - p0) / h * lag
        keep = np.exp(-h / lag) if lag > 0.0 else 0.0
        sensor[SHOWN, s] = p1 - behind + (sensor[SHOWN, s] - p0 + behind) * keep
        restless = max(restless, abs(sensor[SHOWN, s] - p1))
    for i in range(node.shape[1]):
        p = node[SECOND, i]
        restless = max(restless, abs(p - node[PRESSURE, i]) / h)
        node[PRESSURE, i] = p
        if p > node[PEAK, i]:
            node[PEAK, i] = p
    return restless


@compiled
def advance_pressures(
    h_total: float,
    h_start: float,
    node: Floats,
    edge: Floats,
    link: Ints,
    ground: IntRow,
    sensor: Floats,
    sensor_node: IntRow,
    matrix: Floats,
) -> tuple[float, float]:
    """Advance all pressures by ``h_total`` and set the ``VOLUME`` row to the volume that passed each edge.

    ``PEAK`` keeps the highest pressure of each node, ``SHOWN`` the lagged readings. Returns the last internal step as a
    first guess for the next call, and how far anything is from rest: the largest change of a pressure per second in
    the last internal step, or distance of a reading from its pressure [Pa].
    """
    n = node.shape[1]
    restless = 0.0
    for e in range(edge.shape[1]):
        edge[VOLUME, e] = 0.0
    left = h_total
    h = h_start if h_start < h_total else h_total
    while left > 0.0:
        if h > left * (1.0 - 1e-9):
            h = left
        for e in range(edge.shape[1]):
            link[OPEN_FIRST, e] = link[OPEN, e]
        for i in range(n):
            node[CAPACITY, i] = node[COMPLIANCE, i] / (GAMMA * h)
            node[BASE, i] = node[PRESSURE, i]
        _stage(matrix, node, edge, link, ground, OPEN_FIRST, FIRST)
        for e in range(edge.shape[1]):
            link[OPEN_SECOND, e] = link[OPEN_FIRST, e]
        for i in range(n):
            p = node[PRESSURE, i]
            node[BASE, i] = p + (1.0 - GAMMA) / GAMMA * (node[FIRST, i] - p)
        _stage(matrix, node, edge, link, ground, OPEN_SECOND, SECOND)
        worst = 1e-3
        for i in range(n):
            # difference of the two slopes, scaled to a pressure: the leading error term of a first-order step
            gap = 0.3 * abs((node[SECOND, i] - node[BASE, i]) - (node[FIRST, i] - node[PRESSURE, i]))
            error = gap / (TOLERANCE_PA + TOLERANCE_RELATIVE * abs(node[SECOND, i]))
            if error > worst:
                worst = error
        scale = 0.8 / np.sqrt(worst)
        if worst > 1.0 and h > SMALLEST_STEP_S:
            h *= scale if scale > 0.2 else 0.2
            if h < SMALLEST_STEP_S:
                h = SMALLEST_STEP_S
            continue
        restless = _accept(node, edge, link, sensor, sensor_node, h)
        left -= h
        h *= scale if scale < 4.0 else 4.0
    return h, restless
