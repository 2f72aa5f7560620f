"""Species through a network: stirred nodes joined by conveyors, in the order in which the liquid passes them.

One call moves a given volume through every edge. Nodes are handled when all their inflows are known, so a step may be
larger than a node; loops (rare, only when flows fight) are opened at the node that waits for least.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.bed import FILM, HOLD, LIQUID, RELEASED, SIZE, TEMPERATURE, exchange_beads, react_bed
from rigd_sim.physics.compiled import Floats, Ints, compiled, inner
from rigd_sim.physics.conveyor import disperse, exchange_rings, mix, push
from rigd_sim.physics.reaction import EA_OVER_R, HEAD, HEAT, K_REF, ON_BED, T_REF, react

FROM, TO, CELLS, START, BASE, PACKED, LINK_ROWS = 0, 1, 2, 3, 4, 5, 6
"""Rows of ``link`` (integers): end nodes, cells, first slot of each edge now and first row it may use, 1 = packed."""
CELL_VOLUME, FILL, MOVED, EXCHANGE, RADIAL, LEAST, SPREAD, MIXING, WARMTH, EDGE_ROWS = 0, 1, 2, 3, 4, 5, 6, 7, 8, 9
"""Rows of ``edge``: cell volume, fill of the first slot [m3], volume to move [m3], D A / dx [m3/s], exchange with
the next edge as the next ring of the same tube [1/s]; volume that may move at once in any case and ``SMEARING`` ** 0.5
of the edge's volume [m3]; D/R^2 of a tube of rings, 0 elsewhere [1/s]; mean temperature of the liquid [K]."""
HELD, INFLOW, OUTFLOW, NODE_ROWS = 0, 1, 2, 3
"""Rows of ``node``: volume [m3] and, for one step, what enters and leaves."""
ENDLESS, WAITING, DONE, MARK_ROWS = 0, 1, 2, 3
"""Rows of ``mark`` (integers): composition never changes; inflows not yet known; handled."""
DIFFUSION_NUMBER = 1.0
"""Largest D dt of one implicit step of dispersion over the square of a cell, or of 1/``FINEST`` of the bed."""
EDGE, PLACE = 0, 1
"""Rows of ``bed`` (integers): edge of the column, its first place."""
PARTS_MAX = 24
BED_CELLS = 2.0
FINEST = 100
"""Beads and reactions act before the liquid in a bed has moved on by ``BED_CELLS`` cells, or as many hundredths of the
bed if its cells are finer."""
SLOWEST_MODE = 14.68
"""Decay of the slowest radial mode, (3.8317)^2 D/R^2: rings must be mixed before it has decayed by more than 1/e."""
CONVECTED = 0.1
"""Variance over squared mean of a tube whose rings have no time to mix: taken as 0.1 (it grows without bound)."""


@inner
def _parts(dt: float, link: Ints, edge: Floats) -> int:
    """How many parts the pending volumes must be carried in.

    A part of volume dV smears a front by dV^2/12. It may be one cell of an edge, or as much as keeps that below
    ``SMEARING``/12 of the variance that the edge makes anyway: about V^2/(1 + Pe/2) with axial dispersion (closed
    vessel), V^2/(24 D tau/R^2) in a tube (G. I. Taylor), or ``CONVECTED``.
    """
    most = 1.0
    for e in range(edge.shape[1]):
        moved = abs(edge[MOVED, e])
        if moved > 0.0:
            most = max(most, SLOWEST_MODE * edge[MIXING, e] * dt)
        if link[CELLS, e] == 0 or moved <= edge[LEAST, e]:
            continue
        if edge[MIXING, e] > 0.0:
            tau = edge[CELL_VOLUME, e] * link[CELLS, e] / moved * dt
            variance = min(CONVECTED, 1.0 / (24.0 * edge[MIXING, e] * tau))
        else:
            variance = 1.0 / (1.0 + 0.5 * moved / dt * link[CELLS, e] / (edge[EXCHANGE, e] + 1e-30))
        most = max(most, moved / max(edge[LEAST, e], edge[SPREAD, e] * np.sqrt(variance)))
    return int(min(np.ceil(most), PARTS_MAX))


@inner
def _bed_parts(parts: int, link: Ints, edge: Floats, bed: Ints) -> int:
    """In how many of the parts beads and reactions act."""
    most = 1.0
    for b in range(bed.shape[1]):
        e = bed[EDGE, b]
        portion = BED_CELLS * edge[CELL_VOLUME, e] * max(1.0, link[CELLS, e] / FINEST)
        most = max(most, abs(edge[MOVED, e]) / portion)
    return int(min(np.ceil(most), parts))


@inner
def _next_node(mark: Ints) -> int:
    """The first node whose inflows are all there, else the one that waits for fewest."""
    best = -1
    for i in range(mark.shape[1]):
        if not mark[DONE, i] and (best < 0 or mark[WAITING, i] < mark[WAITING, best]):
            best = i
            if mark[WAITING, i] == 0:
                return best
    return best


@inner
def _pass(e: int, moved: float, link: Ints, edge: Floats, cells: Floats, work: Floats) -> None:
    """Push ``moved`` of composition ``work[0]`` through edge ``e``; ``work[1]`` is the amount that came out."""
    n = link[CELLS, e]
    for k in range(cells.shape[1]):
        work[1, k] = abs(moved) * work[0, k] if n == 0 else 0.0
    if n > 0:
        link[START, e], edge[FILL, e] = push(
            cells, link[START, e], link[BASE, e], n, edge[CELL_VOLUME, e], edge[FILL, e], moved, work
        )


@inner
def _receive(i: int, size: float, node: Floats, node_c: Floats, mark: Ints, amount: Floats, work: Floats) -> None:
    """Credit ``work[1]`` to a node; one that was already handled (a loop) takes it in at once."""
    mark[WAITING, i] -= 1
    if not mark[DONE, i]:
        node[INFLOW, i] += size
        for k in range(node_c.shape[1]):
            amount[i, k] += work[1, k]
    elif not mark[ENDLESS, i]:
        held = node[HELD, i]
        node[HELD, i] = held + size
        for k in range(node_c.shape[1]):
            node_c[i, k] = (held * node_c[i, k] + work[1, k]) / (held + size)


@inner
def _announce(share: float, link: Ints, edge: Floats, node: Floats, mark: Ints, amount: Floats) -> None:
    """Count for every node what will leave it and how many inflows it waits for."""
    for i in range(node.shape[1]):
        node[INFLOW, i] = 0.0
        node[OUTFLOW, i] = 0.0
        mark[WAITING, i] = 0
        mark[DONE, i] = 0
        for k in range(amount.shape[1]):
            amount[i, k] = 0.0
    for e in range(edge.shape[1]):
        if edge[MOVED, e] > 0.0:
            node[OUTFLOW, link[FROM, e]] += share * edge[MOVED, e]
            mark[WAITING, link[TO, e]] += 1
        elif edge[MOVED, e] < 0.0:
            node[OUTFLOW, link[TO, e]] -= share * edge[MOVED, e]
            mark[WAITING, link[FROM, e]] += 1


@inner
def move(
    share: float,
    link: Ints,
    edge: Floats,
    cells: Floats,
    node: Floats,
    node_c: Floats,
    mark: Ints,
    amount: Floats,
    work: Floats,
) -> None:
    """Move ``share`` of every edge's volume (negative: from b to a). ``amount`` and ``work`` are scratch."""
    _announce(share, link, edge, node, mark, amount)
    for _ in range(node.shape[1]):
        i = _next_node(mark)
        mark[DONE, i] = 1
        if mark[ENDLESS, i]:
            for k in range(node_c.shape[1]):
                work[0, k] = node_c[i, k]
        elif node[INFLOW, i] != 0.0 or node[OUTFLOW, i] != 0.0:
            mix(i, node, node_c, amount, work)
        if node[OUTFLOW, i] == 0.0:
            continue
        for e in range(edge.shape[1]):
            moved = share * edge[MOVED, e]
            if moved > 0.0 and link[FROM, e] == i:
                _pass(e, moved, link, edge, cells, work)
                _receive(link[TO, e], moved, node, node_c, mark, amount, work)
            elif moved < 0.0 and link[TO, e] == i:
                _pass(e, moved, link, edge, cells, work)
                _receive(link[FROM, e], -moved, node, node_c, mark, amount, work)


@inner
def _react_rows(rows: Floats, s: int, n: int, dt: float, t: float, kin: Floats, species: int, work: Floats) -> None:
    """Reactions that need no packing, in ``n`` rows from row ``s`` at the temperature ``t``."""
    for r in range(kin.shape[0]):
        k = kin[r, K_REF] * np.exp(-kin[r, EA_OVER_R] * (1.0 / t - 1.0 / kin[r, T_REF]))
        work[5, r] = 0.0 if kin[r, ON_BED] != 0.0 else k
    for i in range(s, s + n):
        react(rows, i, dt, kin, species, work)


@inner
def _diffuse_tubes(link: Ints, edge: Floats, cells: Floats, part: float, axial: float, work: Floats) -> None:
    """Radial exchange over ``part`` where liquid moves, diffusion along all tubes over ``axial`` seconds."""
    for e in range(edge.shape[1]):
        if link[PACKED, e] or edge[EXCHANGE, e] <= 0.0:
            continue
        first = e == 0 or edge[RADIAL, e - 1] == 0.0
        if edge[RADIAL, e] > 0.0 and first and (axial > 0.0 or edge[MOVED, e] != 0.0):
            exchange_rings(cells, link, edge, e, part if edge[MOVED, e] != 0.0 else axial, work)
        if axial > 0.0:
            s, n, v = link[START, e], link[CELLS, e], edge[CELL_VOLUME, e]
            disperse(cells, s, n, v, edge[FILL, e], edge[EXCHANGE, e] * axial, work)


@inner
def _work_bed(
    b: int,
    dt: float,
    link: Ints,
    edge: Floats,
    cells: Floats,
    bed: Ints,
    bed_rate: Floats,
    beads: Floats,
    place: Floats,
    activity: Floats,
    kin: Floats,
    species: int,
    in_beads: int,
    work: Floats,
) -> None:
    """Dispersion, exchange with the beads and reactions of one bed over ``dt``; liquid in beads reacts at the place."""
    e = bed[EDGE, b]
    p = bed[PLACE, b]
    s, n, v, fill = link[START, e], link[CELLS, e], edge[CELL_VOLUME, e], edge[FILL, e]
    spread = edge[EXCHANGE, e] * dt
    finer = max(1.0, n / FINEST)
    times = 1 + int(spread / v / (DIFFUSION_NUMBER * finer * finer))  # backward Euler is first order in time
    if spread > 0.0:
        for _ in range(times):
            disperse(cells, s, n, v, fill, spread / times, work)
    exchange_beads(cells, s, n, v, fill, beads, p, bed_rate, b, dt, species, work)
    if kin.shape[0] > 0:
        size, film = bed_rate[SIZE, b], bed_rate[FILM, b]
        react_bed(cells, s, n, v, fill, dt, p, place, activity, kin, species, size, film, work)
    if in_beads and bed_rate[LIQUID, b] > 0.0:
        for i in range(p, p + n):
            _react_rows(beads, i, 1, dt, place[TEMPERATURE, i], kin, species, work)
            for r in range(kin.shape[0]):
                made = work[6, r] * bed_rate[LIQUID, b]
                place[RELEASED, i] -= kin[r, HEAT] * made
                for k in range(species):  # what is retained changes less than the liquid alone would
                    less = made / bed_rate[HOLD + k, b] - work[6, r]
                    beads[i, k] += kin[r, HEAD + k] * less


@compiled
def transport_step(
    dt: float,
    link: Ints,
    edge: Floats,
    cells: Floats,
    node: Floats,
    node_c: Floats,
    mark: Ints,
    bed: Ints,
    bed_rate: Floats,
    beads: Floats,
    place: Floats,
    activity: Floats,
    kin: Floats,
    species: int,
    in_tubes: int,
    room: float,
    amount: Floats,
    work: Floats,
) -> float:
    """Carry the edges' volumes through in as many equal parts as the smearing bound asks for (``_parts``).

    Reactions act on what is in the bed after each part; a portion that enters gains what a portion that leaves lacks,
    so the contact time is right to second order. ``bed_rate``: rows as in ``bed``.
    ``amount`` and ``work`` (8 rows as wide as columns, reactions or slots) are scratch. Returns the largest gas
    fraction (last column) in any node that is not endless or any slot.
    """
    parts = _parts(dt, link, edge)
    bed_parts = _bed_parts(parts, link, edge, bed)
    part = dt / parts
    bed_dt = 0.0
    for step in range(parts):
        move(1.0 / parts, link, edge, cells, node, node_c, mark, amount, work)
        _diffuse_tubes(link, edge, cells, part, dt if step == parts - 1 else 0.0, work)
        bed_dt += part
        if (step + 1) * bed_parts // parts > step * bed_parts // parts:
            for b in range(bed.shape[1]):
                _work_bed(
                    b, bed_dt, link, edge, cells, bed, bed_rate, beads, place, activity, kin, species, in_tubes, work
                )
            bed_dt = 0.0
        if in_tubes:
            for e in range(edge.shape[1]):
                if link[CELLS, e] > 0 and not link[PACKED, e]:
                    t = edge[WARMTH, e]
                    _react_rows(cells, link[START, e], link[CELLS, e] + 1, part, t, kin, species, work)
            _react_rows(node_c, 0, node_c.shape[0], part, room, kin, species, work)
    return _most_gas(link, cells, node_c, mark)


@inner
def _most_gas(link: Ints, cells: Floats, node_c: Floats, mark: Ints) -> float:
    """The largest gas fraction anywhere."""
    gas = node_c.shape[1] - 1
    most = 0.0
    for i in range(node_c.shape[0]):
        if not mark[ENDLESS, i]:
            most = max(most, node_c[i, gas])
    for e in range(link.shape[1]):
        if link[CELLS, e] > 0:
            for j in range(link[START, e], link[START, e] + link[CELLS, e] + 1):
                most = max(most, cells[j, gas])
    return most
