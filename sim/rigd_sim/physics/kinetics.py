"""Conversions in closed form, for checks and for plans. Any coherent units; R in J/(mol K)."""

from __future__ import annotations

import math

from rigd_sim.physics.constants import GAS_CONSTANT_J_MOL_K

NEARLY_EQUAL = 1e-6


def second_order(k: float, a0: float, b0: float, tau: float) -> float:
    """X of A + B in plug flow: M (E-1)/(M E - 1), M = b0/a0, E = exp(k tau (b0-a0)); the limit for equal feeds.

    O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 3.
    """
    m = b0 / a0
    if abs(m - 1.0) < NEARLY_EQUAL:
        return k * a0 * tau / (1.0 + k * a0 * tau)
    e = math.expm1(k * tau * (b0 - a0))
    return m * e / (m * (e + 1.0) - 1.0)


def reversible_second_order(kf: float, equilibrium: float, a0: float, b0: float, tau: float) -> float:
    """X of A + B = C + D with dx/dt = kf ((a-x)(b-x) - x^2/K), K not 1."""
    q = 1.0 - 1.0 / equilibrium
    root = math.sqrt((a0 + b0) ** 2 - 4.0 * q * a0 * b0)
    low, high = sorted(((a0 + b0 - root) / (2.0 * q), (a0 + b0 + root) / (2.0 * q)))
    e = math.exp(-kf * q * (high - low) * tau)
    return low * high * (1.0 - e) / (high - low * e) / a0


def equilibrium_conversion(equilibrium: float, ratio: float) -> float:
    """X at equilibrium of A + B = C + D for b0/a0 = ``ratio``."""
    q = 1.0 - 1.0 / equilibrium
    return ((1.0 + ratio) - math.sqrt((1.0 + ratio) ** 2 - 4.0 * q * ratio)) / (2.0 * q)


def series_parallel(left: float, r: float) -> float:
    """cP/cA0 of A + B -> P (k1), P + B -> S (k2 = r k1) at cA/cA0 = ``left``; the history of B cancels.

    O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 8.
    """
    if abs(r - 1.0) < NEARLY_EQUAL:
        return -left * math.log(left)
    return float((left**r - left) / (1.0 - r))


def series_parallel_best(r: float) -> tuple[float, float]:
    """cA/cA0 and cP/cA0 where P is at its maximum."""
    if abs(r - 1.0) < NEARLY_EQUAL:
        return math.exp(-1.0), math.exp(-1.0)
    return float(r ** (1.0 / (1.0 - r))), float(r ** (r / (1.0 - r)))


def arrhenius_factor(activation_kJ_mol: float, t_K: float, reference_K: float) -> float:
    """k(T)/k(T_ref)."""
    return math.exp(-activation_kJ_mol * 1e3 / GAS_CONSTANT_J_MOL_K * (1.0 / t_K - 1.0 / reference_K))


def effectiveness(thiele: float) -> float:
    """eta of a sphere, first order, phi = R sqrt(k/De): 3/phi^2 (phi coth phi - 1).

    E. W. Thiele, Ind. Eng. Chem. 31 (1939) 916; R. Aris, Chem. Eng. Sci. 6 (1957) 262.
    """
    if thiele < 1e-3:
        return 1.0 - thiele**2 / 15.0
    return 3.0 / thiele**2 * (thiele / math.tanh(thiele) - 1.0)


def convective_first_order(damkoehler: float, steps: int = 20_000) -> float:
    """c/c0 of a first-order reaction in laminar flow without diffusion: integral of e^{-Da theta} dF (K. G.
    Denbigh 1951).

    Midpoint rule in y = 1/(2 theta), where F = 1 - y^2.
    """
    h = 1.0 / steps
    return sum(2.0 * y * math.exp(-damkoehler / (2.0 * y)) * h for y in ((i + 0.5) * h for i in range(steps)))


def convective_second_order(damkoehler: float) -> float:
    """c/c0 of equal feeds in laminar flow without diffusion: 1 - Da (1 - Da/2 ln(1 + 2/Da)) (K. G. Denbigh 1951)."""
    return 1.0 - damkoehler * (1.0 - damkoehler / 2.0 * math.log(1.0 + 2.0 / damkoehler))
