"""Rate equations and their integration in one portion of liquid.

    power       r = k(T) a prod c_i^n_i
    reversible  r = k(T) a (prod c_i^n_i - prod c_j^m_j / K)
    LHHW        r = k(T) a (prod c_i^n_i - prod c_j^m_j / K) / (1 + sum K_i c_i)^2     (two-site surface reaction)
    k(T) = k_ref exp(-Ea/R (1/T - 1/T_ref))      (Arrhenius; S. Arrhenius, Z. Phys. Chem. 4 (1889) 226)

Concentrations mol/m3, rates mol/(m3 s) of liquid. Integrated in extents, so every element is conserved to rounding.
The classical fourth-order Runge-Kutta method in as many parts as keep step times rate derivative below ``STIFF`` (at
most ``PARTS_MAX``), the midpoint rule below ``GENTLE``; an extent never takes more than a reactant holds.
"""

from __future__ import annotations

from rigd_sim.physics.compiled import Floats, inner

POWER, REVERSIBLE, LHHW = 0, 1, 2
STIFF = 0.5
GENTLE = 0.03
PARTS_MAX = 400
TRACE = 1e-3

K_REF, T_REF, EA_OVER_R, HEAT, EQUILIBRIUM, LAW, ON_BED, DIFFUSIVITY, HEAD = 0, 1, 2, 3, 4, 5, 6, 7, 8
"""Columns of the reaction table ``kin`` (one row per reaction); after ``HEAD`` follow four blocks as wide as the
species: stoichiometry, orders, reverse orders, adsorption constants. ``DIFFUSIVITY`` [m2/s] is above zero where the
rate constant is the intrinsic one, so that pores and films slow the reaction (``rigd_sim.physics.diffusion``)."""


@inner
def _product(c: Floats, i: int, kin: Floats, r: int, at: int, species: int) -> float:
    """prod c^n with the orders in the block of ``kin`` that begins at ``at``; nothing below zero."""
    result = 1.0
    for j in range(species):
        n = kin[r, at + j]
        if n == 0.0:
            continue
        x = c[i, j] if c[i, j] > 0.0 else 0.0
        if n == 1.0:
            result *= x
        elif n == 2.0:
            result *= x * x
        else:
            result *= x**n
    return result


@inner
def law(c: Floats, i: int, kin: Floats, r: int, species: int) -> float:
    """Rate of reaction ``r`` in row ``i`` over its rate constant."""
    value = _product(c, i, kin, r, HEAD + species, species)
    if kin[r, LAW] != POWER and kin[r, EQUILIBRIUM] > 0.0:
        value -= _product(c, i, kin, r, HEAD + 2 * species, species) / kin[r, EQUILIBRIUM]
    if kin[r, LAW] == LHHW:
        below = 1.0
        for j in range(species):
            below += kin[r, HEAD + 3 * species + j] * (c[i, j] if c[i, j] > 0.0 else 0.0)
        value /= below * below
    return value


@inner
def rates(c: Floats, i: int, kin: Floats, species: int, work: Floats, out: int) -> None:
    """Rates [mol/(m3 s)] of all reactions in row ``i``, constants from ``work[5]``, to row ``out`` of ``work``."""
    for r in range(kin.shape[0]):
        k = work[5, r]
        work[out, r] = k * law(c, i, kin, r, species) if k != 0.0 else 0.0


@inner
def _shift(c: Floats, i: int, kin: Floats, species: int, work: Floats, row: int, factor: float) -> None:
    """work[4] = c[i] + factor * nu^T work[row], species columns only."""
    for j in range(species):
        value = c[i, j]
        for r in range(kin.shape[0]):
            value += factor * kin[r, HEAD + j] * work[row, r]
        work[4, j] = value


@inner
def _sensitivity(c: Floats, i: int, kin: Floats, species: int, work: Floats) -> float:
    """Upper estimate of the fastest relaxation rate [1/s]: sum |dr/dc| |nu| for power laws."""
    fastest = 0.0
    for r in range(kin.shape[0]):
        k = work[5, r]
        if k == 0.0:
            continue
        forward = k * _product(c, i, kin, r, HEAD + species, species)
        backward = 0.0
        if kin[r, LAW] != POWER and kin[r, EQUILIBRIUM] > 0.0:
            backward = k * _product(c, i, kin, r, HEAD + 2 * species, species) / kin[r, EQUILIBRIUM]
        for j in range(species):
            x = c[i, j] if c[i, j] > TRACE else TRACE
            slope = kin[r, HEAD + species + j] * forward + kin[r, HEAD + 2 * species + j] * backward
            fastest += abs(kin[r, HEAD + j]) * slope / x
    return fastest


@inner
def _midpoint(c: Floats, i: int, h: float, kin: Floats, species: int, work: Floats) -> None:
    """Extents of one step to ``work[0]``: midpoint rule, for steps so short that its error does not matter."""
    _shift(c, i, kin, species, work, 0, 0.0)
    rates(work, 4, kin, species, work, 1)
    _shift(c, i, kin, species, work, 1, 0.5 * h)
    rates(work, 4, kin, species, work, 0)
    for r in range(kin.shape[0]):
        work[0, r] *= h


@inner
def _runge_kutta(c: Floats, i: int, h: float, kin: Floats, species: int, work: Floats) -> None:
    """Extents of one step to ``work[0]``: classical fourth order."""
    for stage in range(4):
        factor = 0.0 if stage == 0 else (h if stage == 3 else 0.5 * h)
        _shift(c, i, kin, species, work, stage - 1 if stage > 0 else 0, factor)
        rates(work, 4, kin, species, work, stage)
    for r in range(kin.shape[0]):
        work[0, r] = h * (work[0, r] + 2.0 * work[1, r] + 2.0 * work[2, r] + work[3, r]) / 6.0


@inner
def react(c: Floats, i: int, dt: float, kin: Floats, species: int, work: Floats) -> None:
    """Advance row ``i`` of ``c`` by ``dt`` with the rate constants in ``work[5]``.

    ``work`` has 7 rows as wide as columns or reactions; row 6 comes back with the extent [mol/m3] of each reaction.
    """
    count = kin.shape[0]
    for r in range(count):
        work[6, r] = 0.0
    stiffness = dt * _sensitivity(c, i, kin, species, work)
    if stiffness == 0.0:
        return
    parts = int(stiffness / STIFF) + 1
    if parts > PARTS_MAX:
        parts = PARTS_MAX
    h = dt / parts
    for _ in range(parts):
        if stiffness < GENTLE:
            _midpoint(c, i, h, kin, species, work)
        else:
            _runge_kutta(c, i, h, kin, species, work)
        for r in range(count):
            step = work[0, r]
            for j in range(species):
                used = -kin[r, HEAD + j] * step
                if used > 0.0 and used > c[i, j]:
                    step *= c[i, j] / used if c[i, j] > 0.0 else 0.0
            work[6, r] += step
            for j in range(species):
                c[i, j] += kin[r, HEAD + j] * step
