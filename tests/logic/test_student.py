"""Quantiles against printed tables: t values as quoted for the slope test of Kelly & Hedengren, J. Process Control 23
(2013) 326-331 (5 %, two-sided, n - 2 degrees); tanks in series as recomputed with a public library."""

from __future__ import annotations

import pytest

from rigd.logic.student import gamma_quantile, t_distribution, t_quantile


@pytest.mark.parametrize(("n", "expected"), [(10, 2.306), (20, 2.1009), (30, 2.0484), (60, 2.0017)])
def test_t_two_sided_five_percent(n: int, expected: float) -> None:
    assert t_quantile(0.975, n - 2) == pytest.approx(expected, abs=6e-5)


def test_t_with_one_degree_is_cauchy() -> None:
    """Closed form: 1/2 + atan(t)/pi."""
    assert t_distribution(1.0, 1) == pytest.approx(0.75, abs=1e-12)
    assert t_quantile(0.75, 1) == pytest.approx(1.0, abs=1e-9)


def test_median_is_zero() -> None:
    assert t_quantile(0.5, 7) == pytest.approx(0.0, abs=1e-6)


TANKS = [
    (1, 0.051293, 2.995732, 4.605170, 6.907755),
    (2, 0.177681, 2.371932, 3.319176, 4.616707),
    (5, 0.394030, 1.830704, 2.320925, 2.958830),
    (10, 0.542541, 1.570522, 1.878312, 2.265737),
    (50, 0.779295, 1.243421, 1.358067, 1.494493),
    (100, 0.841393, 1.169971, 1.247226, 1.337703),
]


@pytest.mark.parametrize("row", TANKS)
def test_front_through_tanks_in_series(row: tuple[float, ...]) -> None:
    tanks, *times = row
    found = [gamma_quantile(p, tanks) for p in (0.05, 0.95, 0.99, 0.999)]
    assert found == pytest.approx(times, abs=1.1e-6)


@pytest.mark.parametrize(("probability", "freedom"), [(0.4, 5), (1.0, 5), (0.9, 0)])
def test_nonsense_is_refused(probability: float, freedom: int) -> None:
    with pytest.raises(ValueError, match="probability"):
        t_quantile(probability, freedom)
