"""Residence-time distributions in closed form. theta = t/tau; Pe = u L / D_L (interstitial velocity, vessel length).

Closed-closed vessel: P. V. Danckwerts, Chem. Eng. Sci. 2 (1953) 1-13; variance by E. T. van der Laan (1958); step
response
by the eigen-series of H. Brenner, Chem. Eng. Sci. 17 (1962) 229-243. O. Levenspiel, Chemical Reaction Engineering, 3rd
ed., chs. 11-14.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable

BRENNER_TERMS = 400
SERIES_EXPONENT_MAX = 12.0
FOURIER_TERMS, EULER_TERMS = 220, 14


def variance_closed(peclet: float) -> float:
    """sigma_theta^2 = 2/Pe - 2/Pe^2 (1 - e^-Pe); the mean is exactly 1."""
    return 2.0 / peclet - 2.0 / peclet**2 * -math.expm1(-peclet)


def variance_open(peclet: float) -> float:
    """Open-open vessel: 2/Pe + 8/Pe^2 (its mean is 1 + 2/Pe)."""
    return 2.0 / peclet + 8.0 / peclet**2


def danckwerts(peclet: float, damkoehler: float) -> float:
    """c/c0 of a first-order reaction in a closed vessel with dispersion.

    Danckwerts 1953; J. F. Wehner, R. H. Wilhelm, Chem. Eng. Sci. 6 (1956) 89-93. Written so that it cannot overflow.
    """
    a = math.sqrt(1.0 + 4.0 * damkoehler / peclet)
    below = (1.0 + a) ** 2 - (1.0 - a) ** 2 * math.exp(-a * peclet)
    return 4.0 * a * math.exp(peclet * (1.0 - a) / 2.0) / below


def tanks_first_order(tanks: float, damkoehler: float) -> float:
    """c/c0 of a first-order reaction in N equal tanks: (1 + Da/N)^-N."""
    return float((1.0 + damkoehler / tanks) ** -tanks)


def peclet_of_variance(variance: float) -> float:
    """Pe of the closed vessel with this sigma_theta^2 (0 < variance < 1), by bisection."""
    low, high = 1e-6, 1e7
    for _ in range(200):
        middle = math.sqrt(low * high)
        low, high = (middle, high) if variance_closed(middle) > variance else (low, middle)
    return math.sqrt(low * high)


def _root(k: int, half: float) -> float:
    """k-th root of w Pe/2 + 2 atan(w) = k pi by bisection; w grows with k."""
    low, high = 0.0, k * math.pi / half
    for _ in range(100):
        middle = 0.5 * (low + high)
        if middle * half + 2.0 * math.atan(middle) < k * math.pi:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


def step_closed(peclet: float, theta: float) -> float:
    """F(theta) of the closed-closed vessel to about 1e-9; slow.

    The eigen-series cancels to about 1e-16 exp(Pe/2 - Pe theta/4); where that is too much the transform is inverted.
    """
    if peclet / 2.0 - peclet * theta / 4.0 > SERIES_EXPONENT_MAX:
        return invert(lambda s: _closed(peclet, s) / s, theta)
    return _eigen_series(peclet, theta)


def _closed(peclet: float, s: complex) -> complex:
    """Transform of the residence-time distribution of the closed-closed vessel, time in units of its mean."""
    a = cmath.sqrt(1.0 + 4.0 * s / peclet)
    below = (1.0 + a) ** 2 - (1.0 - a) ** 2 * cmath.exp(-a * peclet)
    return 4.0 * a * cmath.exp(peclet * (1.0 - a) / 2.0) / below


def invert(transform: Callable[[complex], complex], t: float) -> float:
    """Inverse Laplace transform at ``t`` by the Fourier series with Euler's summation; about 1e-9 for smooth functions.

    J. Abate, W. Whitt, ORSA J. Comput. 7 (1995) 36-43.
    """
    shift = 20.7  # discretisation error e^-20.7 = 1e-9
    total = 0.5 * transform(complex(shift / (2.0 * t))).real
    partial = []
    for k in range(1, FOURIER_TERMS + EULER_TERMS + 1):
        term = transform(complex(shift, 2.0 * k * math.pi) / (2.0 * t)).real
        total += -term if k % 2 else term
        if k >= FOURIER_TERMS:
            partial.append(total)
    mean: float = sum(math.comb(EULER_TERMS, j) * partial[j] for j in range(EULER_TERMS + 1)) / 2.0**EULER_TERMS
    return math.exp(shift / 2.0) / t * mean


def _reach(curve: Callable[[float], float], part: float) -> float:
    """Where a rising curve has come to ``part`` (bisection)."""
    low, high = 1e-3, 1.0
    while curve(high) < part:
        low, high = high, 2.0 * high
    for _ in range(40):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if curve(middle) < part else (low, middle)
    return 0.5 * (low + high)


def wait_closed(peclet: float, part: float) -> float:
    """Mean residence times after a step until the outlet of the closed-closed vessel has gone this part of the way."""
    return _reach(lambda theta: step_closed(peclet, theta), part)


def wait_reacting(peclet: float, damkoehler: float, part: float, product: bool) -> float:
    """The same for the front of A -> P, first order, that a step of A starts: to ``part`` of its own final value."""
    left = danckwerts(peclet, damkoehler)
    final = 1.0 - left if product else left

    def outlet(s: complex) -> complex:
        reactant = _closed(peclet, s + damkoehler)
        return (_closed(peclet, s) - reactant if product else reactant) / s / final

    return _reach(lambda theta: invert(outlet, theta), part)


def _eigen_series(peclet: float, theta: float) -> float:
    """F(theta) by H. Brenner's series.

    Residues of the transform 4a e^{Pe(1-a)/2} / ((1+a)^2 - (1-a)^2 e^{-a Pe}) at a = i w, s = -Pe (1 + w^2)/4.
    """
    half = peclet / 2.0
    total = 0.0
    for k in range(1, BRENNER_TERMS):
        w = _root(k, half)
        square = w * w
        decay = peclet * (1.0 + square) / 4.0
        if decay * theta - half > 60.0:
            break
        # residue / s, from the derivative of (1 - w^2) sin(w Pe/2) + 2 w cos(w Pe/2) with respect to s
        slope = (
            -2.0 * w * math.sin(w * half)
            + (1.0 - square) * half * math.cos(w * half)
            + 2.0 * math.cos(w * half)
            - 2.0 * w * half * math.sin(w * half)
        )
        total += 2.0 * w * (peclet * w / 2.0) / slope * math.exp(half - decay * theta) / decay
    return 1.0 + total


def ogata_banks(peclet: float, theta: float) -> float:
    """Semi-infinite bed, fixed inlet concentration (A. Ogata, R. B. Banks, USGS Prof. Paper 411-A, 1961).

    Also the flux-averaged outlet of a bed with a flux inlet (A. Kreft, A. Zuber, Chem. Eng. Sci. 33 (1978) 1471).
    """
    z = math.sqrt(peclet / (4.0 * theta))
    x = z * (1.0 + theta)
    tail = math.exp(peclet + math.log(math.erfc(x))) if x < 26.0 else 0.0
    return 0.5 * math.erfc(z * (1.0 - theta)) + 0.5 * tail


def flux_resident(peclet: float, theta: float) -> float:
    """Semi-infinite bed, flux inlet, *resident* concentration (L. Lapidus, N. R. Amundson, J. Phys. Chem. 56
    (1952) 984)."""
    z = math.sqrt(peclet / (4.0 * theta))
    x = z * (1.0 + theta)
    tail = math.exp(peclet + math.log(math.erfc(x))) if x < 26.0 else 0.0
    middle = math.sqrt(peclet * theta / math.pi) * math.exp(-peclet * (1.0 - theta) ** 2 / (4.0 * theta))
    return 0.5 * math.erfc(z * (1.0 - theta)) + middle - 0.5 * (1.0 + peclet + peclet * theta) * tail
