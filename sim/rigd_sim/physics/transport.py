"""Species through a network: stirred nodes joined by conveyors, in the order in which the liquid passes them.

One call moves a given volume through every edge. Nodes are handled when all their inflows are known, so a step may be
larger than a node; loops (rare, only when flows fight) are opened at the node that waits for least.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.bed import exchange_beads, react_bed
from rigd_sim.physics.compiled import Floats, Ints, compiled
from rigd_sim.physics.conveyor import disperse, mix, push_backward, push_forward
from rigd_sim.physics.reaction import react


@compiled
def _next_node(waiting: Ints, done: Ints) -> int:
    """The first node whose inflows are all there, else the one that waits for fewest."""
    best = -1
    for i in range(waiting.shape[0]):
        if not done[i] and (best < 0 or waiting[i] < waiting[best]):
            best = i
            if waiting[i] == 0:
                return best
    return best


@compiled
def _pass(
    e: int,
    volume: float,
    cell_count: Ints,
    cell_start: Ints,
    cell_volume: Floats,
    fill: Floats,
    cells: Floats,
    inlet: Floats,
    passed: Floats,
) -> None:
    """Push ``volume`` of composition ``inlet`` through edge ``e``; ``passed`` is the amount that came out."""
    n, s = cell_count[e], cell_start[e]
    size = abs(volume)
    for k in range(passed.shape[0]):
        passed[k] = size * inlet[k] if n == 0 else 0.0
    if n == 0:
        return
    row = cells[s : s + n + 1]
    if volume > 0.0:
        fill[e] = push_forward(row, n, cell_volume[e], fill[e], size, inlet, passed)
    else:
        fill[e] = push_backward(row, n, cell_volume[e], fill[e], size, inlet, passed)


@compiled
def _merge(node: int, size: float, passed: Floats, node_volume: Floats, node_c: Floats) -> None:
    """Add an inflow to a node that was already handled (a loop)."""
    held = node_volume[node]
    node_volume[node] = held + size
    for k in range(passed.shape[0]):
        node_c[node, k] = (held * node_c[node, k] + passed[k]) / (held + size)


@compiled
def move(
    node_volume: Floats,
    node_c: Floats,
    endless: Ints,
    ea: Ints,
    eb: Ints,
    cell_count: Ints,
    cell_start: Ints,
    cell_volume: Floats,
    fill: Floats,
    cells: Floats,
    moved: Floats,
) -> None:
    """Move ``moved[e]`` [m3] through each edge (negative: from b to a). ``endless`` nodes never change."""
    nodes, width = node_c.shape
    edges = ea.shape[0]
    v_in = np.zeros(nodes)
    v_out = np.zeros(nodes)
    amount = np.zeros((nodes, width))
    waiting = np.zeros(nodes, dtype=np.int64)
    done = np.zeros(nodes, dtype=np.int64)
    out = np.zeros(width)
    passed = np.zeros(width)
    for e in range(edges):
        if moved[e] != 0.0:
            source, sink = (ea[e], eb[e]) if moved[e] > 0.0 else (eb[e], ea[e])
            v_out[source] += abs(moved[e])
            waiting[sink] += 1
    for _ in range(nodes):
        i = _next_node(waiting, done)
        done[i] = 1
        if endless[i]:
            out[:] = node_c[i]
        elif v_in[i] != 0.0 or v_out[i] != 0.0:
            node_volume[i] = mix(node_volume[i], node_c[i], v_in[i], amount[i], v_out[i], out)
        if v_out[i] == 0.0:
            continue
        for e in range(edges):
            volume = moved[e]
            if volume == 0.0 or (ea[e] if volume > 0.0 else eb[e]) != i:
                continue
            sink = eb[e] if volume > 0.0 else ea[e]
            size = abs(volume)
            _pass(e, volume, cell_count, cell_start, cell_volume, fill, cells, out, passed)
            waiting[sink] -= 1
            if done[sink] and not endless[sink]:
                _merge(sink, size, passed, node_volume, node_c)
                continue
            v_in[sink] += size
            for k in range(width):
                amount[sink, k] += passed[k]


@compiled
def _react_everywhere(
    cells: Floats,
    node_c: Floats,
    beads: Floats,
    dt: float,
    t: float,
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
    work: Floats,
) -> None:
    """Reactions that need no packing, in tubes, nodes and beads at room temperature ``t``."""
    reactions = k_ref.shape[0]
    k = np.empty(reactions)
    extent = np.empty(reactions)
    for r in range(reactions):
        k[r] = 0.0 if on_bed[r] else k_ref[r] * np.exp(-ea_over_r[r] * (1.0 / t - 1.0 / t_ref[r]))
    for i in range(cells.shape[0]):
        react(cells[i], dt, nu, k, law, orders, reverse, equilibrium, adsorption, extent, work)
    for i in range(node_c.shape[0]):
        react(node_c[i], dt, nu, k, law, orders, reverse, equilibrium, adsorption, extent, work)
    for i in range(beads.shape[0]):
        react(beads[i], dt, nu, k, law, orders, reverse, equilibrium, adsorption, extent, work)


@compiled
def transport_step(
    dt: float,
    parts: int,
    node_volume: Floats,
    node_c: Floats,
    endless: Ints,
    ea: Ints,
    eb: Ints,
    cell_count: Ints,
    cell_start: Ints,
    cell_volume: Floats,
    fill: Floats,
    cells: Floats,
    volume: Floats,
    exchange: Floats,
    bed_edge: Ints,
    place_start: Ints,
    beads: Floats,
    bead_volume: Floats,
    bead_rate: Floats,
    temperature: Floats,
    activity: Floats,
    released: Floats,
    turnover: Floats,
    room: float,
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
    in_tubes: bool,
) -> None:
    """Carry ``volume`` [m3] through the edges in ``parts`` equal parts, with dispersion, beads and reactions.

    ``exchange`` = D A / dx [m3/s] per edge. Reactions act on what is in the bed after each part; a portion that
    enters gains what a portion that leaves lacks, so the contact time is right to second order.
    """
    part = dt / parts
    edges = ea.shape[0]
    moved = np.empty(edges)
    width = cells.shape[1]
    work = np.empty((6, max(max(width, k_ref.shape[0]), cells.shape[0] + 1)))
    for e in range(edges):
        moved[e] = volume[e] / parts
    for _ in range(parts):
        move(node_volume, node_c, endless, ea, eb, cell_count, cell_start, cell_volume, fill, cells, moved)
        for e in range(edges):
            n, s = cell_count[e], cell_start[e]
            if n > 0 and exchange[e] > 0.0:
                disperse(cells[s : s + n + 1], n, cell_volume[e], fill[e], exchange[e] * part, work[5])
        for b in range(bed_edge.shape[0]):
            e, p = bed_edge[b], place_start[b]
            n, s = cell_count[e], cell_start[e]
            bed = cells[s : s + n + 1]
            exchange_beads(bed, beads[p : p + n], n, cell_volume[e], fill[e], bead_volume[b], bead_rate[b] * part)
            if k_ref.shape[0] > 0:
                react_bed(
                    bed, n, cell_volume[e], fill[e], part, temperature[p : p + n], activity[p : p + n],
                    nu, k_ref, t_ref, ea_over_r, on_bed, law, orders, reverse, equilibrium, adsorption, heat,
                    released[p : p + n], turnover[p : p + n], work,
                )  # fmt: skip
        if in_tubes:
            _react_everywhere(
                cells, node_c, beads, part, room, nu, k_ref, t_ref, ea_over_r, on_bed, law, orders, reverse,
                equilibrium, adsorption, work,
            )  # fmt: skip
