"""Rate equations and their integration in one portion of liquid.

    power       r = k(T) a prod c_i^n_i
    reversible  r = k(T) a (prod c_i^n_i - prod c_j^m_j / K)
    LHHW        r = k(T) a (prod c_i^n_i - prod c_j^m_j / K) / (1 + sum K_i c_i)^2     (two-site surface reaction)
    k(T) = k_ref exp(-Ea/R (1/T - 1/T_ref))      (Arrhenius; S. Arrhenius, Z. Phys. Chem. 4 (1889) 226)

Concentrations mol/m3, rates mol/(m3 s) of liquid. Integrated in extents, so every element is conserved to
rounding. The classical
fourth-order Runge-Kutta method while the step is short against the reaction (step times rate derivative below
``STIFF``), in
as many parts as that needs up to ``PARTS_MAX``; an extent never takes more than a reactant holds.
"""

from __future__ import annotations

import numpy as np

from rigd_sim.physics.compiled import Floats, Ints, compiled

POWER, REVERSIBLE, LHHW = 0, 1, 2
STIFF = 0.5
PARTS_MAX = 400


@compiled
def _product(c: Floats, orders: Floats) -> float:
    """prod c_i^n_i, with nothing below zero; whole powers without ``pow``."""
    result = 1.0
    for i in range(orders.shape[0]):
        n = orders[i]
        if n == 0.0:
            continue
        x = max(c[i], 0.0)
        if n == 1.0:
            result *= x
        elif n == 2.0:
            result *= x * x
        else:
            result *= x**n
    return result


@compiled
def rate(
    c: Floats, k: float, law: int, orders: Floats, reverse: Floats, equilibrium: float, adsorption: Floats
) -> float:
    """Rate of one reaction [mol/(m3 s)] with rate constant ``k`` at temperature (and activity)."""
    r = _product(c, orders)
    if law != POWER and equilibrium > 0.0:
        r -= _product(c, reverse) / equilibrium
    if law == LHHW:
        below = 1.0
        for i in range(adsorption.shape[0]):
            below += adsorption[i] * max(c[i], 0.0)
        r /= below * below
    return k * r


@compiled
def _rates(
    c: Floats,
    k: Floats,
    law: Ints,
    orders: Floats,
    reverse: Floats,
    equilibrium: Floats,
    adsorption: Floats,
    out: Floats,
) -> None:
    for j in range(k.shape[0]):
        out[j] = 0.0
        if k[j] != 0.0:
            out[j] = rate(c, k[j], law[j], orders[j], reverse[j], equilibrium[j], adsorption[j])


@compiled
def _shift(c: Floats, nu: Floats, extent: Floats, factor: float, out: Floats) -> None:
    """out = c + factor * nu^T extent, species columns only."""
    for i in range(c.shape[0]):
        out[i] = c[i]
    for j in range(extent.shape[0]):
        if extent[j] != 0.0:
            for i in range(nu.shape[1]):
                out[i] += factor * nu[j, i] * extent[j]


@compiled
def _sensitivity(
    c: Floats,
    nu: Floats,
    k: Floats,
    law: Ints,
    orders: Floats,
    reverse: Floats,
    equilibrium: Floats,
    adsorption: Floats,
) -> float:
    """Upper estimate of the fastest relaxation rate [1/s]: sum |dr/dc| |nu| for power laws."""
    fastest = 0.0
    for j in range(k.shape[0]):
        if k[j] == 0.0:
            continue
        forward = k[j] * _product(c, orders[j])
        backward = 0.0
        if law[j] != POWER and equilibrium[j] > 0.0:
            backward = k[j] * _product(c, reverse[j]) / equilibrium[j]
        for i in range(nu.shape[1]):
            x = max(c[i], 1e-3)
            fastest += abs(nu[j, i]) * (orders[j, i] * forward + reverse[j, i] * backward) / x
    return fastest


@compiled
def react(
    c: Floats,
    dt: float,
    nu: Floats,
    k: Floats,
    law: Ints,
    orders: Floats,
    reverse: Floats,
    equilibrium: Floats,
    adsorption: Floats,
    extent: Floats,
    work: Floats,
) -> None:
    """Advance one portion by ``dt``; ``c`` is updated, ``extent`` [mol/m3] per reaction is what happened.

    ``work`` is scratch of shape (6, max(columns, reactions)).
    """
    reactions = k.shape[0]
    for j in range(reactions):
        extent[j] = 0.0
    stiffness = dt * _sensitivity(c, nu, k, law, orders, reverse, equilibrium, adsorption)
    if stiffness == 0.0:
        return
    parts = int(min(max(np.ceil(stiffness / STIFF), 1.0), PARTS_MAX))
    h = dt / parts
    trial = work[4, : c.shape[0]]
    k1, k2 = work[0, :reactions], work[1, :reactions]
    k3, k4 = work[2, :reactions], work[3, :reactions]
    for _ in range(parts):
        _rates(c, k, law, orders, reverse, equilibrium, adsorption, k1)
        _shift(c, nu, k1, 0.5 * h, trial)
        _rates(trial, k, law, orders, reverse, equilibrium, adsorption, k2)
        _shift(c, nu, k2, 0.5 * h, trial)
        _rates(trial, k, law, orders, reverse, equilibrium, adsorption, k3)
        _shift(c, nu, k3, h, trial)
        _rates(trial, k, law, orders, reverse, equilibrium, adsorption, k4)
        for j in range(reactions):
            step = h * (k1[j] + 2.0 * k2[j] + 2.0 * k3[j] + k4[j]) / 6.0
            for i in range(nu.shape[1]):
                used = -nu[j, i] * step
                if used > c[i] > 0.0:
                    step *= c[i] / used
                elif used > 0.0 and c[i] <= 0.0:
                    step = 0.0
            extent[j] += step
            for i in range(nu.shape[1]):
                c[i] += nu[j, i] * step
