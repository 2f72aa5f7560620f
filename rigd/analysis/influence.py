"""What a campaign of nights says: a chance with its interval, quantiles, and which number matters most."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigd.analysis.designs import Matrix

ENOUGH = 5
"""Fewer nights than this give no rank correlation worth the name."""
Vector = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Chance:
    """``hits`` of ``nights``, with the interval that holds the true chance in 95 of 100 such campaigns."""

    hits: int
    nights: int
    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Spread:
    """Smallest, 5 %, median, 95 % and largest value of one result; ``number`` of nights that have it."""

    number: int
    low: float
    p05: float
    median: float
    p95: float
    high: float


@dataclass(frozen=True, slots=True)
class Influence:
    """How a varied number and a result go together.

    ``rank``: Spearman's rho (C. Spearman 1904), with the probability ``p`` of as much by chance. ``first`` and
    ``total``: shares of variance (A. Saltelli et al. 2010), ``nan`` unless the design is sobol.
    """

    what: str
    rank: float
    p: float
    first: float = float("nan")
    total: float = float("nan")


def chance(hits: int, nights: int) -> Chance:
    """Exact 95 % interval (C. J. Clopper, E. S. Pearson, Biometrika 26 (1934) 404).

    >>> c = chance(8, 10); round(c.low, 4), round(c.high, 4)
    (0.4439, 0.9748)
    """
    from scipy.stats import binomtest

    interval = binomtest(hits, nights).proportion_ci(0.95, method="exact")
    return Chance(hits, nights, float(interval.low), float(interval.high))


def spread(values: Sequence[float]) -> Spread | None:
    """Quantiles of what is finite; ``None`` of nothing."""
    finite = np.array([value for value in values if np.isfinite(value)])
    if not len(finite):
        return None
    low, p05, median, p95, high = np.quantile(finite, (0.0, 0.05, 0.5, 0.95, 1.0))
    return Spread(len(finite), float(low), float(p05), float(median), float(p95), float(high))


def influences(names: Sequence[str], numbers: Matrix, result: Vector) -> list[Influence]:
    """Rank correlation of each varied number with a result, strongest first; nights without the result are left out."""
    from scipy.stats import spearmanr

    whole = np.isfinite(result)
    found = []
    for column, name in enumerate(names):
        x, y = numbers[whole, column], result[whole]
        if len(y) < ENOUGH or np.ptp(x) == 0.0 or np.ptp(y) == 0.0:
            continue
        rho = spearmanr(x, y)
        found.append(Influence(name, float(rho.statistic), float(rho.pvalue)))
    return sorted(found, key=lambda one: -abs(one.rank))


def variance_shares(names: Sequence[str], result: Vector) -> list[Influence]:
    """Shares of variance from a whole sobol design, its rows in order. Empty when a night has no result."""
    from scipy.stats import sobol_indices

    count = len(names)
    base = len(result) // (count + 2)
    if count == 0 or base < 2 or not np.isfinite(result).all() or np.ptp(result) == 0.0:
        return []
    rows = result[: base * (count + 2)].reshape(count + 2, base)
    values = {"f_A": rows[:1], "f_B": rows[1:2], "f_AB": rows[2:][:, np.newaxis, :]}
    shares = sobol_indices(func=values, n=base)
    found = [
        Influence(name, float("nan"), float("nan"), float(first), float(total))
        for name, first, total in zip(names, np.ravel(shares.first_order), np.ravel(shares.total_order), strict=True)
    ]
    return sorted(found, key=lambda one: -one.total)
