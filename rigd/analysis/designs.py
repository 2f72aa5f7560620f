"""Designs of experiments: which numbers each night of a campaign gets.

random: independent. latin hypercube: each number's range in as many equal parts as nights, each part once (M. D.
McKay, R. J. Beckman, W. J. Conover, Technometrics 21 (1979) 239). sobol: the two matrices and their mixtures that
variance shares need (A. Saltelli et al., Comput. Phys. Commun. 181 (2010) 259), on a Sobol sequence. all combinations:
of choices.
"""

from __future__ import annotations

from itertools import product

import numpy as np
from numpy.typing import NDArray

Matrix = NDArray[np.float64]
EDGE = 1e-6
"""How near to 0 and 1 a quantile may be: no number is drawn from the far tail of a distribution."""


def unit_points(design: str, nights: int, numbers: int, seed: int) -> Matrix:
    """Points of the unit cube, one row a night (random, latin hypercube) or one row of the sobol design."""
    if numbers == 0:
        return np.zeros((nights, 0))
    rng = np.random.default_rng(seed)
    if design == "random":
        points = rng.random((nights, numbers))
    elif design == "latin hypercube":
        points = (
            np.array([rng.permutation(nights) for _ in range(numbers)]).T + rng.random((nights, numbers))
        ) / nights
    else:
        points = _sobol(nights, numbers, rng)
    return np.clip(points, EDGE, 1.0 - EDGE)


def base_of(nights: int, numbers: int) -> int:
    """Rows of each matrix of a sobol design that has at most ``nights`` rows in all: a power of two, 2 at least."""
    return max(2, 1 << int(np.log2(max(nights // (numbers + 2), 1))))


def _sobol(nights: int, numbers: int, rng: np.random.Generator) -> Matrix:
    from scipy.stats import qmc

    base = base_of(nights, numbers)
    both = qmc.Sobol(2 * numbers, scramble=True, seed=rng).random(base)
    first, second = both[:, :numbers], both[:, numbers:]
    mixed = []
    for column in range(numbers):
        one = first.copy()
        one[:, column] = second[:, column]
        mixed.append(one)
    return np.vstack([first, second, *mixed])


def quantile(way: str, bounds: tuple[float, ...], u: float) -> float:
    """The number at quantile ``u`` of a distribution.

    uniform (lowest, highest), normal (mean, standard deviation), lognormal (median, factor), choose (the choices).

    >>> quantile("uniform", (2.0, 4.0), 0.25), quantile("lognormal", (10.0, 2.0), 0.5)
    (2.5, 10.0)
    >>> quantile("choose", (1, 5, 9), 0.4)
    5.0
    """
    if way == "uniform":
        return bounds[0] + (bounds[1] - bounds[0]) * u
    if way == "choose":
        return float(bounds[min(int(u * len(bounds)), len(bounds) - 1)])
    from statistics import NormalDist

    z = NormalDist().inv_cdf(u)
    if way == "normal":
        return bounds[0] + bounds[1] * z
    return float(bounds[0] * bounds[1] ** z)


def combinations(choices: tuple[tuple[float, ...], ...]) -> Matrix:
    """Every combination, one a row."""
    return np.array(list(product(*choices)), dtype=float).reshape(-1, len(choices))
