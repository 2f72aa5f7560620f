"""Liquid in a tube or bed as a row of equal cells that moves with the flow: advection without numerical smearing.

A conveyor of ``n`` cells of volume ``v`` is stored as ``n + 1`` slots. The first slot holds ``fill`` (0..v), the last
one ``v - fill``. Liquid that enters fills the first slot, liquid that leaves drains the last; when the first is full,
all slots move up by one. The only smearing is inside the slot being filled: a front at its part f becomes two steps,
variance f (1-f) v^2, at most v^2/4 and v^2/6 on the average, per conveyor however long. Forward and backward are mirror
images. Amounts are conserved to rounding.

Axial dispersion acts between the slots with nothing passing the ends (closed-closed vessel: P. V. Danckwerts,
Chem. Eng. Sci. 2 (1953) 1-13), implicitly in time: the second moment grows by exactly 2 D dt and no
concentration can become negative.

All conveyors lie in one table ``cells``; ``s`` is the row of a conveyor's first slot. Each has twice the rows that it
needs: when the slots move up, the window moves instead of the liquid, and only when it reaches the end of its rows
are they carried back to the middle. So a step costs in proportion to the cells that pass, whatever their number.
(Plain indices, because slices make the just-in-time compiler slow.)
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, Ints, inner


@inner
def _recentre(cells: Floats, s: int, base: int, n: int) -> int:
    """Carry the ``n + 1`` slots from row ``s`` to the middle of the rows from ``base``; their new first row."""
    to = base + (n + 1) // 2
    up = to > s
    for j in range(n + 1):
        i = n - j if up else j
        for k in range(cells.shape[1]):
            cells[to + i, k] = cells[s + i, k]
    return to


@inner
def push(
    cells: Floats, s: int, base: int, n: int, v: float, fill: float, amount: float, work: Floats
) -> tuple[int, float]:
    """Push a volume ``amount`` (negative: from the other end) of composition ``work[0]`` in; add what leaves to
    ``work[1]``; return the new first row and fill."""
    forward = amount > 0.0
    left = amount if forward else -amount
    while left > 0.0:
        if not forward and fill <= 0.0:
            if s == base + n + 1:
                s = _recentre(cells, s, base, n)
            s += 1
            fill = v
            for k in range(cells.shape[1]):
                cells[s + n, k] = work[0, k]
        room = v - fill if forward else fill
        take = left if left < room else room
        enters = s if forward else s + n
        leaves = s + n if forward else s
        held = fill if forward else v - fill
        for k in range(cells.shape[1]):
            work[1, k] += take * cells[leaves, k]
            cells[enters, k] = (cells[enters, k] * held + work[0, k] * take) / (held + take)
        left -= take
        if not forward:
            fill = fill - take if take < fill else 0.0
        elif take < room:
            fill += take
        else:
            if s == base:
                s = _recentre(cells, s, base, n)
            s -= 1
            fill = 0.0
            for k in range(cells.shape[1]):
                cells[s, k] = work[0, k]
    return s, fill


@inner
def disperse(cells: Floats, s: int, n: int, v: float, fill: float, exchange: float, work: Floats) -> None:
    """Backward-Euler dispersion. ``exchange`` = D A dt / dx [m3]: volume exchanged between neighbours one cell apart.

    ``work[7]`` is scratch of at least n + 1. The end slots are shorter, so their neighbours are nearer.
    """
    width = cells.shape[1]
    head = fill / v
    first = 2.0 * exchange / (1.0 + head) if n > 1 else 2.0 * exchange
    last = 2.0 * exchange / (2.0 - head) if n > 1 else first
    g_before = 0.0
    carry = 0.0
    for j in range(n + 1):
        capacity = fill if j == 0 else (v - fill if j == n else v)
        g = 0.0 if j == n else (first if j == 0 else (last if j == n - 1 else exchange))
        for k in range(width):
            value = capacity * cells[s + j, k]
            if j > 0:
                value += carry * cells[s + j - 1, k]
            cells[s + j, k] = value
        work[7, j] = capacity + g_before + g - carry * g_before
        carry = g / work[7, j]
        g_before = g
    for j in range(n, -1, -1):
        g = 0.0 if j == n else (first if j == 0 else (last if j == n - 1 else exchange))
        scale = 1.0 / work[7, j]
        for k in range(width):
            above = cells[s + j + 1, k] if j < n else 0.0
            cells[s + j, k] = (cells[s + j, k] + g * above) * scale


@inner
def _give(cells: Floats, s: int, n: int, v: float, fill: float, p: int, k: int, amount: float) -> None:
    """Add ``amount`` (may be negative) to place ``p``: by volume if it gains, by content if it loses."""
    head = fill / v
    up = cells[s + p, k]
    down = cells[s + p + 1, k]
    share = head
    if amount < 0.0:
        share = head * up / (head * up + (1.0 - head) * down)
    held_up = fill if p == 0 else v
    held_down = v - fill if p == n - 1 else v
    if held_up > 0.0:
        cells[s + p, k] = up + share * amount / held_up
    if held_down > 0.0:
        cells[s + p + 1, k] = down + (1.0 - share) * amount / held_down


@inner
def _even(work: Floats, rings: int) -> bool:
    """True when the ring means in ``work[2]`` are the same to rounding: nothing to exchange."""
    low = work[2, 0]
    high = work[2, 0]
    for r in range(1, rings):
        if work[2, r] < low:
            low = work[2, r]
        if work[2, r] > high:
            high = work[2, r]
    return bool(high - low <= 1e-9 * high)


@inner
def _mix_rings(edge: Floats, e: int, rings: int, half: float, work: Floats) -> None:
    """One Crank-Nicolson step of twice ``half`` over the ring values in ``work[3]``."""
    for r in range(rings):
        work[4, r] = work[3, r]
    carry = 0.0
    for r in range(rings):
        inner_rate = half * edge[4, e + r - 1] if r > 0 else 0.0
        outer_rate = half * edge[4, e + r]
        rhs = work[4, r] * (1.0 - inner_rate - outer_rate)
        rhs += inner_rate * work[4, r - 1] if r > 0 else 0.0
        rhs += outer_rate * work[4, r + 1] if r < rings - 1 else 0.0
        rhs += inner_rate * work[3, r - 1] if r > 0 else 0.0
        pivot = 1.0 + inner_rate + outer_rate - inner_rate * carry
        carry = outer_rate / pivot
        work[3, r] = rhs / pivot
        work[5, r] = carry
    for r in range(rings - 2, -1, -1):
        work[3, r] += work[5, r] * work[3, r + 1]


@inner
def exchange_rings(cells: Floats, link: Ints, edge: Floats, e: int, dt: float, work: Floats) -> None:
    """Radial diffusion between the rings of a tube (kernel edges from ``e``), place by place.

    Crank-Nicolson over the rings: alternated with moves it has exactly the long-time dispersion of the continuous
    process at any step. In as many steps as keep it positive, which costs the slow modes little of that.
    Rows of ``link`` and ``edge`` as in ``transport``: 2 cells, 3 start; 0 cell volume, 1 fill, 4 radial exchange.
    """
    rings = 1
    fastest = edge[4, e]
    while edge[4, e + rings - 1] > 0.0:
        fastest = max(fastest, edge[4, e + rings - 1] + edge[4, e + rings])
        rings += 1
    times = 1 + int(0.5 * dt * fastest)
    half = 0.5 * dt / times
    n = link[2, e]
    v = edge[0, e]
    for p in range(n):
        for k in range(cells.shape[1]):
            for r in range(rings):
                s = link[3, e + r] + p
                head = edge[1, e + r] / v
                work[2, r] = head * cells[s, k] + (1.0 - head) * cells[s + 1, k]
            if _even(work, rings):
                continue
            for r in range(rings):
                work[3, r] = work[2, r]
            for _ in range(times):
                _mix_rings(edge, e, rings, half, work)
            for r in range(rings):
                moved = v * (work[3, r] - work[2, r])
                if moved != 0.0:
                    _give(cells, link[3, e + r], n, v, edge[1, e + r], p, k, moved)


@inner
def mix(i: int, node: Floats, c: Floats, amount: Floats, work: Floats) -> None:
    """Stirred node ``i`` over one step of constant flows: update volume and ``c``, mean outlet to ``work[0]``.

    Exact solution of d(V c)/dt = q_in c_in - q_out c with V changing linearly. Rows of ``node``: volume, in, out.
    """
    held = node[0, i]
    v_in = node[1, i]
    v_out = node[2, i]
    new = held + v_in - v_out
    if new < 0.0:
        new = 0.0
    node[0, i] = new
    keep = 0.0
    if v_in > 0.0 and held > 0.0 and new > 0.0:
        net = v_in - v_out
        if abs(net) > 1e-9 * (held + v_in):
            keep = (new / held) ** (-v_in / net)
        else:
            keep = np.exp(-v_in / held)
    for k in range(c.shape[1]):
        before = c[i, k]
        if v_in <= 0.0:
            work[0, k] = before
            continue
        inlet = amount[i, k] / v_in
        # the larger of the two parts takes exactly what the balance leaves, so nothing is lost to rounding
        if v_out < 0.1 * held:
            work[0, k] = inlet + (before - inlet) * 0.5 * (1.0 + keep)
            c[i, k] = (held * before + amount[i, k] - v_out * work[0, k]) / new
        else:
            c[i, k] = inlet + (before - inlet) * keep
            work[0, k] = (held * before + amount[i, k] - new * c[i, k]) / v_out
