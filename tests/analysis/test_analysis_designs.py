"""Designs of experiments and what is made of their results, against published figures."""

from __future__ import annotations

import math

import numpy as np
import pytest

from rigd.analysis.designs import base_of, combinations, quantile, unit_points
from rigd.analysis.influence import chance, influences, spread, variance_shares


def test_latin_hypercube_has_each_part_once() -> None:
    """M. D. McKay, R. J. Beckman, W. J. Conover 1979: the definition."""
    points = unit_points("latin hypercube", 50, 4, 3)
    for column in points.T:
        assert sorted((column * 50).astype(int)) == list(range(50))


@pytest.mark.parametrize("design", ["random", "latin hypercube", "sobol"])
def test_designs_repeat_themselves_and_follow_the_seed(design: str) -> None:
    assert (unit_points(design, 40, 3, 5) == unit_points(design, 40, 3, 5)).all()
    assert not (unit_points(design, 40, 3, 5) == unit_points(design, 40, 3, 6)).all()
    assert ((unit_points(design, 40, 3, 5) > 0) & (unit_points(design, 40, 3, 5) < 1)).all()


def test_sobol_design_changes_one_number_at_a_time() -> None:
    """A. Saltelli et al. 2010: each mixture is the first matrix with one column of the second."""
    base = base_of(40, 3)
    assert base == 8
    rows = unit_points("sobol", 40, 3, 1)
    assert rows.shape == (5 * base, 3)
    first, second, mixed = rows[:base], rows[base : 2 * base], rows[2 * base :].reshape(3, base, 3)
    for column in range(3):
        others = [k for k in range(3) if k != column]
        assert (mixed[column][:, column] == second[:, column]).all()
        assert (mixed[column][:, others] == first[:, others]).all()


def test_variance_shares_of_the_ishigami_function() -> None:
    """T. Ishigami, T. Homma 1990, a 7, b 0.1: first order 0.3139, 0.4424, 0; total 0.5576, 0.4424, 0.2437."""
    rows = unit_points("sobol", 2**13 * 5, 3, 1)
    x = -math.pi + 2 * math.pi * rows
    y = np.sin(x[:, 0]) + 7 * np.sin(x[:, 1]) ** 2 + 0.1 * x[:, 2] ** 4 * np.sin(x[:, 0])
    found = {one.what: one for one in variance_shares(["x1", "x2", "x3"], y)}
    for name, first, total in (("x1", 0.3139, 0.5576), ("x2", 0.4424, 0.4424), ("x3", 0.0, 0.2437)):
        assert found[name].first == pytest.approx(first, abs=0.02)
        assert found[name].total == pytest.approx(total, abs=0.02)


@pytest.mark.parametrize(
    ("hits", "nights", "low", "high"), [(0, 10, 0.0, 0.3085), (8, 10, 0.4439, 0.9748), (10, 10, 0.6915, 1.0)]
)
def test_interval_of_a_chance(hits: int, nights: int, low: float, high: float) -> None:
    """C. J. Clopper, E. S. Pearson 1934; 0 and 10 of 10: 1 - 0.025^(1/10) = 0.3085 in closed form."""
    found = chance(hits, nights)
    assert found.low == pytest.approx(low, abs=5e-5)
    assert found.high == pytest.approx(high, abs=5e-5)
    if hits == 0:
        assert found.high == pytest.approx(1 - 0.025**0.1, rel=1e-9)


def test_rank_correlation_of_a_worked_example() -> None:
    """Ten pairs with ranks (1 2 3 4 5 6 7 8 9 10) and (1 6 8 7 10 9 3 5 2 4): rho = 1 - 6*194/990 = -0.1758."""
    x = np.array([[86], [97], [99], [100], [101], [103], [106], [110], [112], [113]], dtype=float)
    y = np.array([0, 20, 28, 27, 50, 29, 7, 17, 6, 12], dtype=float)
    (found,) = influences(["iq"], x, y)
    assert found.rank == pytest.approx(-0.17575757, abs=1e-8)
    assert found.p == pytest.approx(0.6272, abs=1e-4)


def test_distributions_at_their_quantiles() -> None:
    """Standard normal at 0.975: 1.959964 (any table)."""
    assert quantile("normal", (10.0, 2.0), 0.975) == pytest.approx(10 + 2 * 1.959964, abs=1e-6)
    assert quantile("lognormal", (10.0, 2.0), 0.841344746) == pytest.approx(20.0, rel=1e-6)
    assert quantile("uniform", (-1.0, 1.0), 0.5) == 0.0
    assert {quantile("choose", (1.0, 2.0, 3.0), u) for u in (0.0, 0.5, 0.999)} == {1.0, 2.0, 3.0}
    assert combinations(((1.0, 2.0), (5.0, 6.0, 7.0))).shape == (6, 2)


def test_spread_leaves_out_what_is_not_known() -> None:
    seen = spread([1.0, math.nan, 3.0, 2.0])
    assert seen is not None
    assert (seen.number, seen.low, seen.median, seen.high) == (3, 1.0, 2.0, 3.0)
    assert spread([math.nan]) is None
