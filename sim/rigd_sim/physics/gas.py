"""Gas that gives way to pressure wherever it is: P V = constant (R. Boyle 1662; isothermal ideal gas).

The last column of every composition is the *amount* of gas: its volume at atmospheric pressure per volume of the place.
At the pressure P of the place it fills the share m P0/P. After each step of transport every place is made to fit again:

    cell:  liquid share + m P0/P = 1; what is missing comes from the nearer node, what is too much goes there
    node:  volume = liquid + m P0/P of its own

but no node gives more than it has above its own volume at this pressure; the rest waits for liquid that flows in.
Amounts only change hands, so nothing is lost. Where suction stands below atmospheric pressure gas keeps its volume.
"""

from __future__ import annotations

from rigd_sim.physics.compiled import Floats, Ints, Row, compiled, inner
from rigd_sim.physics.transport import CELL_VOLUME, CELLS, ENDLESS, FILL, FROM, HELD, START, TO


@inner
def _filled(rows: Floats, i: int, species: int, share: float) -> float:
    """Share of a place that its liquid and its gas (``share`` = P0/P) would fill."""
    gas = rows.shape[1] - 1
    total = rows[i, gas] * share
    for k in range(species, gas):
        total += rows[i, k]
    return float(total)


@inner
def _fit_cell(
    cells: Floats, row: int, held: float, excess: float, filled: float, i: int, node: Floats, node_c: Floats,
    mark: Ints, gas: int, species: int, own: float,
) -> float:  # fmt: skip
    """Give what is too much to node ``i`` or take what is missing; returns the volume that could not be had."""
    volume = node[HELD, i]
    endless = mark[ENDLESS, i] != 0
    if excess > 0.0:
        moved = excess * held
        for k in range(gas + 1):
            amount = cells[row, k] * held * (1.0 - 1.0 / filled)
            cells[row, k] /= filled
            if not endless:
                node_c[i, k] = (node_c[i, k] * volume + amount) / (volume + moved)
        if not endless:
            node[HELD, i] = volume + moved
        return 0.0
    liquid = 0.0
    for k in range(species, gas):
        liquid += node_c[i, k]
    wanted = -excess * held
    can = (volume - own) * liquid
    if endless or can <= 0.0 or liquid <= 1e-9:
        return wanted
    moved = wanted if wanted < can else can
    for k in range(gas):
        amount = node_c[i, k] / liquid * moved
        cells[row, k] += amount / held
        node_c[i, k] = (node_c[i, k] * volume - amount) / (volume - moved)
    node_c[i, gas] *= volume / (volume - moved)
    node[HELD, i] = volume - moved
    return wanted - moved


@inner
def _fit_nodes(node: Floats, node_c: Floats, mark: Ints, species: int, ratio: Row, own: Row, unmet: Row) -> None:
    """Let nodes with gas shrink or grow."""
    gas = node_c.shape[1] - 1
    for i in range(node.shape[1]):
        if node_c[i, gas] > 0.0 and not mark[ENDLESS, i] and ratio[i] < 1.0 and node[HELD, i] > 0.0:
            wanted = node[HELD, i] * (1.0 - _filled(node_c, i, species, ratio[i]))
            spare = node[HELD, i] - own[i]
            shrink = wanted if wanted < spare else (spare if spare > 0.0 else 0.0)
            if wanted > 0.0:
                unmet[i] += wanted - shrink
            kept = 1.0 - shrink / node[HELD, i]
            node[HELD, i] *= kept
            for k in range(gas + 1):
                node_c[i, k] /= kept


@compiled
def fit_gas(
    link: Ints, edge: Floats, cells: Floats, node: Floats, node_c: Floats, mark: Ints, species: int, ratio: Row,
    barrel: Ints, own: Row, unmet: Row,
) -> None:  # fmt: skip
    """Make every place fit its pressure. ``ratio`` is P0/P of every node (1 where it shall not act).

    ``barrel`` has a column per syringe at work: its node, which keeps its volume like a cell, and the pump's outlet.
    ``own`` is the volume that each node has at its pressure. ``unmet`` comes back with what its cells and it want [m3].
    """
    gas = node_c.shape[1] - 1
    for i in range(node.shape[1]):
        unmet[i] = 0.0
    for e in range(link.shape[1]):
        n, v = link[CELLS, e], edge[CELL_VOLUME, e]
        a, b = link[FROM, e], link[TO, e]
        for j in range(n + 1 if n > 0 else 0):
            row = link[START, e] + j
            held = edge[FILL, e] if j == 0 else (v - edge[FILL, e] if j == n else v)
            if cells[row, gas] <= 0.0 or held <= 0.0:
                continue
            along = (j + 0.5) / (n + 1.0)
            filled = _filled(cells, row, species, 1.0 / ((1.0 - along) / ratio[a] + along / ratio[b]))
            if abs(filled - 1.0) > 1e-12:
                i = a if along < 0.5 else b
                unmet[i] += _fit_cell(
                    cells, row, held, filled - 1.0, filled, i, node, node_c, mark, gas, species, own[i]
                )
    for s in range(barrel.shape[1]):
        row, i = barrel[0, s], barrel[1, s]
        held = node[HELD, row]
        if node_c[row, gas] > 0.0 and held > 0.0:
            filled = _filled(node_c, row, species, ratio[i])
            if abs(filled - 1.0) > 1e-12:
                unmet[i] += _fit_cell(
                    node_c, row, held, filled - 1.0, filled, i, node, node_c, mark, gas, species, own[i]
                )
    _fit_nodes(node, node_c, mark, species, ratio, own, unmet)


@compiled
def gas_at_nodes(link: Ints, edge: Floats, cells: Floats, node: Floats, node_c: Floats, mark: Ints, out: Row) -> None:
    """Gas at each node [m3 at atmospheric pressure]: its own, and half of what is in each edge that ends there."""
    gas = node_c.shape[1] - 1
    for i in range(node.shape[1]):
        out[i] = 0.0 if mark[ENDLESS, i] else node[HELD, i] * node_c[i, gas]
    for e in range(link.shape[1]):
        if link[CELLS, e] == 0:
            continue
        inside = 0.0
        for row in range(link[START, e], link[START, e] + link[CELLS, e] + 1):
            inside += cells[row, gas]
        out[link[FROM, e]] += 0.5 * edge[CELL_VOLUME, e] * inside
        out[link[TO, e]] += 0.5 * edge[CELL_VOLUME, e] * inside
