"""Liquid in a tube or bed as a row of equal cells that moves with the flow: advection without numerical smearing.

A conveyor of ``n`` cells of volume ``v`` is stored as ``n + 1`` slots. The first slot holds ``fill`` (0..v), the
last one
``v - fill``. Liquid that enters fills the first slot, liquid that leaves drains the last; when the first is full, all
slots move up by one. The only smearing is inside the slot being filled: at most one cell volume, variance v^2/12
per conveyor. Forward and backward are mirror images. Amounts are conserved to rounding.

Axial dispersion acts between the slots with nothing passing the ends (closed-closed vessel: P. V. Danckwerts,
Chem. Eng. Sci. 2 (1953) 1-13), implicitly in time: the second moment grows by exactly 2 D dt and no
concentration can become negative.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, compiled


@compiled
def push_forward(cells: Floats, n: int, v: float, fill: float, amount: float, inlet: Floats, out: Floats) -> float:
    """Push ``amount`` of volume with composition ``inlet`` in; add what leaves to ``out``; return the new fill."""
    width = cells.shape[1]
    left = amount
    while left > 0.0:
        room = v - fill
        take = min(left, room)
        total = fill + take
        for k in range(width):
            out[k] += take * cells[n, k]
            cells[0, k] = (cells[0, k] * fill + inlet[k] * take) / total
        left -= take
        fill = total
        if take == room:
            for j in range(n, 0, -1):
                for k in range(width):
                    cells[j, k] = cells[j - 1, k]
            for k in range(width):
                cells[0, k] = inlet[k]
            fill = 0.0
    return fill


@compiled
def push_backward(cells: Floats, n: int, v: float, fill: float, amount: float, inlet: Floats, out: Floats) -> float:
    """The same from the other end: liquid enters the last slot and leaves the first."""
    width = cells.shape[1]
    left = amount
    while left > 0.0:
        if fill <= 0.0:
            for j in range(n):
                for k in range(width):
                    cells[j, k] = cells[j + 1, k]
            for k in range(width):
                cells[n, k] = inlet[k]
            fill = v
        take = min(left, fill)
        held = v - fill
        for k in range(width):
            out[k] += take * cells[0, k]
            cells[n, k] = (cells[n, k] * held + inlet[k] * take) / (held + take)
        left -= take
        fill = fill - take if take < fill else 0.0
    return fill


@compiled
def disperse(cells: Floats, n: int, v: float, fill: float, exchange: float, work: Floats) -> None:
    """Backward-Euler dispersion. ``exchange`` = D A dt / dx [m3]: volume exchanged between neighbours one cell apart.

    ``work`` is scratch of at least n + 1. The end slots are shorter, so their centres are nearer to their neighbours.
    """
    if exchange <= 0.0:
        return
    width = cells.shape[1]
    head = fill / v
    first = 2.0 * exchange / (1.0 + head) if n > 1 else 2.0 * exchange
    last = 2.0 * exchange / (2.0 - head) if n > 1 else first
    # forward elimination of the symmetric tridiagonal system, in place on ``cells``
    g_prev = 0.0
    pivot = 1.0
    for j in range(n + 1):
        capacity = fill if j == 0 else (v - fill if j == n else v)
        g = 0.0 if j == n else (first if j == 0 else (last if j == n - 1 else exchange))
        diagonal = capacity + g_prev + g
        carry = 0.0
        if j > 0:
            carry = g_prev / pivot
            diagonal -= carry * g_prev
        for k in range(width):
            value = capacity * cells[j, k]
            if j > 0:
                value += carry * cells[j - 1, k]
            cells[j, k] = value
        pivot = diagonal
        work[j] = pivot
        g_prev = g
    for k in range(width):
        cells[n, k] /= work[n]
    for j in range(n - 1, -1, -1):
        g = first if j == 0 else (last if j == n - 1 else exchange)
        for k in range(width):
            cells[j, k] = (cells[j, k] + g * cells[j + 1, k]) / work[j]


@compiled
def mix(held: float, c: Floats, v_in: float, amount_in: Floats, v_out: float, out: Floats) -> float:
    """A stirred volume over one step of constant flows: update ``c``, write the mean outlet composition to ``out``.

    Exact solution of d(V c)/dt = q_in c_in - q_out c with V changing linearly. Returns the new volume.
    """
    new = held + v_in - v_out
    if new < 0.0:
        new = 0.0
    width = c.shape[0]
    if v_in <= 0.0:
        for k in range(width):
            out[k] = c[k]
        return new
    net = v_in - v_out
    if held <= 0.0 or new <= 0.0:
        keep = 0.0
    elif abs(net) > 1e-9 * (held + v_in):
        keep = (new / held) ** (-v_in / net)
    else:
        keep = np.exp(-v_in / held)
    for k in range(width):
        inlet = amount_in[k] / v_in
        before = c[k]
        # the larger of the two parts takes exactly what the balance leaves, so nothing is lost to rounding
        if v_out < 0.1 * held:
            out[k] = inlet + (before - inlet) * 0.5 * (1.0 + keep)
            c[k] = (held * before + amount_in[k] - v_out * out[k]) / new
        else:
            c[k] = inlet + (before - inlet) * keep
            out[k] = (held * before + amount_in[k] - new * c[k]) / v_out
    return new
