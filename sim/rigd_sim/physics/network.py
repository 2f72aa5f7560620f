"""Pressures in a network of nodes with compliance, joined by passive edges.

    C_i dP_i/dt = q_i - sum_e Q_e,     Q_e = G_e (P_a - P_b)           (tube, bed: G = 1/resistance)
                                       Q_e = G_e (P_a - P_b - crack)   (check valve, back-pressure regulator: never < 0)

Integrated by the two-stage, stiffly accurate, L-stable diagonally implicit Runge-Kutta method with gamma = 1 -
1/sqrt(2)
(R. Alexander, SIAM J. Numer. Anal. 14 (1977) 1006-1021). Stages and volumes use the same flows, so liquid is
conserved to
rounding at any step; the step is halved until the two stages agree to the tolerance. A dead-headed pump gives exactly
dP/dt = Q/C. Any coherent units; the plant uses Pa, m3, s.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, Ints, compiled

GAMMA = 1.0 - 0.5**0.5
TOLERANCE_PA = 100.0
TOLERANCE_RELATIVE = 5e-4
SMALLEST_STEP_S = 1e-4


@compiled
def _assemble(
    matrix: Floats,
    ea: Ints,
    eb: Ints,
    conductance: Floats,
    crack: Floats,
    is_open: Ints,
    capacity: Floats,
    ground: Ints,
) -> None:
    """Fill the stage matrix C/(gamma h) + L; a ground node keeps its pressure."""
    nodes = capacity.shape[0]
    for i in range(nodes):
        for j in range(nodes):
            matrix[i, j] = 0.0
        matrix[i, i] = 1.0 if ground[i] else capacity[i]
    for e in range(ea.shape[0]):
        g = conductance[e]
        if g == 0.0 or (crack[e] >= 0.0 and not is_open[e]):
            continue
        a, b = ea[e], eb[e]
        if not ground[a]:
            matrix[a, a] += g
            matrix[a, b] -= g
        if not ground[b]:
            matrix[b, b] += g
            matrix[b, a] -= g


@compiled
def _factor(matrix: Floats) -> None:
    """LU in place without pivoting: the matrix is diagonally dominant by construction."""
    n = matrix.shape[0]
    for k in range(n):
        pivot = 1.0 / matrix[k, k]
        for i in range(k + 1, n):
            if matrix[i, k] != 0.0:
                factor = matrix[i, k] * pivot
                matrix[i, k] = factor
                for j in range(k + 1, n):
                    if matrix[k, j] != 0.0:
                        matrix[i, j] -= factor * matrix[k, j]


@compiled
def _substitute(matrix: Floats, x: Floats) -> None:
    """Solve in place with the factors of ``_factor``."""
    n = matrix.shape[0]
    for i in range(n):
        for j in range(i):
            x[i] -= matrix[i, j] * x[j]
    for i in range(n - 1, -1, -1):
        for j in range(i + 1, n):
            x[i] -= matrix[i, j] * x[j]
        x[i] /= matrix[i, i]


@compiled
def _flow(e: int, p: Floats, ea: Ints, eb: Ints, conductance: Floats, crack: Floats, is_open: Ints) -> float:
    """Flow through edge ``e`` at pressures ``p``, in the linear branch that was assumed."""
    drop = p[ea[e]] - p[eb[e]]
    if crack[e] >= 0.0:
        return float(conductance[e] * (drop - crack[e])) if is_open[e] else 0.0
    return float(conductance[e] * drop)


@compiled
def _stage(
    base: Floats,
    out: Floats,
    matrix: Floats,
    capacity: Floats,
    source: Floats,
    ea: Ints,
    eb: Ints,
    conductance: Floats,
    crack: Floats,
    is_open: Ints,
    ground: Ints,
) -> None:
    """One implicit stage; valves that open or shut by pressure are iterated until their state fits the answer."""
    for _ in range(6):
        _assemble(matrix, ea, eb, conductance, crack, is_open, capacity, ground)
        _factor(matrix)
        for i in range(base.shape[0]):
            out[i] = base[i] if ground[i] else capacity[i] * base[i] + source[i]
        for e in range(ea.shape[0]):
            if crack[e] > 0.0 and is_open[e]:
                if not ground[ea[e]]:
                    out[ea[e]] += conductance[e] * crack[e]
                if not ground[eb[e]]:
                    out[eb[e]] -= conductance[e] * crack[e]
        _substitute(matrix, out)
        changed = False
        for e in range(ea.shape[0]):
            if crack[e] >= 0.0:
                wanted = 1 if out[ea[e]] - out[eb[e]] > crack[e] else 0
                if wanted != is_open[e]:
                    is_open[e] = wanted
                    changed = True
        if not changed:
            return


@compiled
def _lag(p0: float, p1: float, y: float, h: float, lag: float) -> float:
    """First-order instrument after ``h`` on a straight line from p0 to p1 (exact)."""
    if lag <= 0.0:
        return p1
    slope = (p1 - p0) / h
    return float(p1 - slope * lag + (y - p0 + slope * lag) * np.exp(-h / lag))


@compiled
def advance_pressures(
    h_total: float,
    pressure: Floats,
    compliance: Floats,
    source: Floats,
    ground: Ints,
    ea: Ints,
    eb: Ints,
    conductance: Floats,
    crack: Floats,
    is_open: Ints,
    volume: Floats,
    peak: Floats,
    sensor_node: Ints,
    sensor_lag: Floats,
    sensor_value: Floats,
    h_start: float,
) -> float:
    """Advance all pressures by ``h_total`` and add the volume that passed each edge to ``volume``.

    ``peak`` keeps the highest pressure of each node, ``sensor_value`` the lagged readings. Returns the last internal
    step as a first guess for the next call.
    """
    n = pressure.shape[0]
    matrix = np.empty((n, n))
    capacity = np.empty(n)
    base = np.empty(n)
    stage_1 = np.empty(n)
    stage_2 = np.empty(n)
    open_1 = np.empty_like(is_open)
    open_2 = np.empty_like(is_open)
    left = h_total
    h = min(h_start, h_total)
    while left > 0.0:
        if h > left * (1.0 - 1e-9):
            h = left
        for i in range(n):
            capacity[i] = compliance[i] / (GAMMA * h)
        open_1[:] = is_open
        _stage(pressure, stage_1, matrix, capacity, source, ea, eb, conductance, crack, open_1, ground)
        for i in range(n):
            base[i] = pressure[i] + (1.0 - GAMMA) / GAMMA * (stage_1[i] - pressure[i])
        open_2[:] = open_1
        _stage(base, stage_2, matrix, capacity, source, ea, eb, conductance, crack, open_2, ground)
        worst = 0.0
        for i in range(n):
            # difference of the two slopes, scaled to a pressure: the leading error term of a first-order step
            gap = abs((stage_2[i] - base[i]) - (stage_1[i] - pressure[i]))
            worst = max(worst, 0.3 * gap / (TOLERANCE_PA + TOLERANCE_RELATIVE * abs(stage_2[i])))
        if worst > 1.0 and h > SMALLEST_STEP_S:
            h = max(SMALLEST_STEP_S, h * max(0.2, 0.8 / np.sqrt(worst)))
            continue
        for e in range(ea.shape[0]):
            first = _flow(e, stage_1, ea, eb, conductance, crack, open_1)
            second = _flow(e, stage_2, ea, eb, conductance, crack, open_2)
            volume[e] += h * ((1.0 - GAMMA) * first + GAMMA * second)
        for s in range(sensor_node.shape[0]):
            i = sensor_node[s]
            sensor_value[s] = _lag(pressure[i], stage_2[i], sensor_value[s], h, sensor_lag[s])
        for i in range(n):
            pressure[i] = stage_2[i]
            peak[i] = max(peak[i], stage_2[i])
        is_open[:] = open_2
        left -= h
        h = h * min(4.0, 0.8 / np.sqrt(worst + 1e-3))
    return h
