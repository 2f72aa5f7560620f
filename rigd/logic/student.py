"""Student's t and the gamma distribution in plain Python, as far as decisions need them.

Continued fractions and series as in Abramowitz & Stegun, Handbook of Mathematical Functions (1964), 26.5.8 and 6.5.29
to 6.5.31; quantiles by bisection. Good to about 1e-9, which the tests hold against published tables.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import lru_cache

_TINY = 1e-300
_STEPS = 500


@lru_cache(maxsize=256)
def t_quantile(probability: float, freedom: int) -> float:
    """The value that Student's t with ``freedom`` degrees stays below with ``probability`` (0.5 to 1, exclusive)."""
    if not 0.5 <= probability < 1.0 or freedom < 1:
        raise ValueError("probability must be in [0.5, 1) and freedom at least 1")
    return _bisect(lambda t: t_distribution(t, freedom), probability, 1e6)


def t_distribution(t: float, freedom: int) -> float:
    """Probability that Student's t stays below ``t`` >= 0."""
    return 1.0 - 0.5 * _incomplete_beta(freedom / (freedom + t * t), freedom / 2.0, 0.5)


@lru_cache(maxsize=256)
def gamma_quantile(probability: float, shape: float) -> float:
    """Quantile of a gamma distribution with this shape and mean 1 (N tanks in series: shape N, in residence times)."""
    if not 0.0 < probability < 1.0 or shape <= 0:
        raise ValueError("probability must be in (0, 1) and shape above 0")
    return _bisect(lambda x: _lower_gamma(shape, x), probability, 1e6 * (1.0 + shape)) / shape


def _bisect(rising: Callable[[float], float], target: float, high: float) -> float:
    low = 0.0
    for _ in range(_STEPS):
        middle = (low + high) / 2
        if middle in (low, high):
            break
        if rising(middle) < target:
            low = middle
        else:
            high = middle
    return (low + high) / 2


def _incomplete_beta(x: float, a: float, b: float) -> float:
    """Regularised incomplete beta function."""
    if x <= 0.0 or x >= 1.0:
        return min(max(x, 0.0), 1.0)
    if x > (a + 1.0) / (a + b + 2.0):
        return 1.0 - _incomplete_beta(1.0 - x, b, a)
    log_front = a * math.log(x) + b * math.log(1.0 - x) + math.lgamma(a + b) - math.lgamma(a) - math.lgamma(b)
    return math.exp(log_front) * _beta_fraction(x, a, b) / a


def _beta_fraction(x: float, a: float, b: float) -> float:
    """Continued fraction by the modified Lentz rule."""
    c, d = 1.0, 1.0 / _away_from_zero(1.0 - (a + b) * x / (a + 1.0))
    total = d
    for m in range(1, _STEPS):
        even = m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m))
        odd = -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1))
        for term in (even, odd):
            d = 1.0 / _away_from_zero(1.0 + term * d)
            c = _away_from_zero(1.0 + term / c)
            total *= c * d
        if abs(c * d - 1.0) < 1e-15:
            break
    return total


def _away_from_zero(value: float) -> float:
    return value if abs(value) > _TINY else _TINY


def _lower_gamma(shape: float, x: float) -> float:
    """Regularised lower incomplete gamma function."""
    if x <= 0.0:
        return 0.0
    front = math.exp(-x + shape * math.log(x) - math.lgamma(shape))
    return front * _gamma_series(shape, x) if x < shape + 1.0 else 1.0 - front * _gamma_fraction(shape, x)


def _gamma_series(shape: float, x: float) -> float:
    term = total = 1.0 / shape
    for n in range(1, _STEPS):
        term *= x / (shape + n)
        total += term
        if term < total * 1e-16:
            break
    return total


def _gamma_fraction(shape: float, x: float) -> float:
    b = x + 1.0 - shape
    c, d = 1.0 / _TINY, 1.0 / _away_from_zero(b)
    total = d
    for n in range(1, _STEPS):
        term = n * (shape - n)
        b += 2.0
        d = 1.0 / _away_from_zero(term * d + b)
        c = _away_from_zero(b + term / c)
        total *= c * d
        if abs(c * d - 1.0) < 1e-15:
            break
    return total
