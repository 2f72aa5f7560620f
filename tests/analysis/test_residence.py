"""Residence-time distributions against closed forms and recomputed published cases (sources beside each table)."""

from __future__ import annotations

import math

import pytest

from rigd.analysis.residence import (
    Spread,
    closed_variance,
    open_variance,
    series,
    step_response,
    wait_closed,
    wait_s,
    wait_tanks,
)

# O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 13; van der Laan, Chem. Eng. Sci. 7 (1958) 187.
# Recomputed in 30-digit arithmetic from the closed forms: Pe, closed-closed, open-open.
VARIANCES = [
    (1, 0.7357588823, 10),
    (2, 0.5676676416, 3),
    (5, 0.3205390358, 0.72),
    (10, 0.1800009080, 0.28),
    (20, 0.0950000000, 0.12),
    (40, 0.04875, 0.055),
    (100, 0.0198, 0.0208),
    (1000, 0.001998, 0.002008),
]

# H. Brenner, Chem. Eng. Sci. 17 (1962) 229-243: eigen-series and Laplace inversion agreed to 12 digits.
STEPS = {
    5: {0.5: 0.1568059343, 1: 0.6025010782, 2: 0.9396013290, 3: 0.9913184273},
    10: {0.5: 0.0681142060, 0.75: 0.3118168214, 1: 0.5803326769, 2: 0.9715276706},
    20: {0.5: 0.0151487666, 1: 0.5598891951, 1.5: 0.9319100939, 3: 0.9999571208},
    50: {0.5: 0.0002423482, 1: 0.5390884762, 1.25: 0.8911930930, 2: 0.9998849373},
    100: {0.75: 0.0234832544, 1: 0.5279256593, 1.5: 0.9985483622},
}

# The same series inverted for the time: Pe, then theta at 5, 50, 95, 99 and 99.9 %.
WAITS = {
    1: (0.165405, 0.742914, 2.707695, 4.080980, 6.045705),
    2: (0.233796, 0.786981, 2.491176, 3.680246, 5.381421),
    5: (0.358664, 0.866400, 2.097678, 2.927213, 4.112374),
    10: (0.470339, 0.919171, 1.805269, 2.355620, 3.125445),
    20: (0.582163, 0.955135, 1.570827, 1.919426, 2.386558),
    50: (0.710522, 0.980851, 1.354791, 1.546131, 1.789116),
    100: (0.786527, 0.990215, 1.246850, 1.370874, 1.523372),
    200: (0.844826, 0.995054, 1.172045, 1.253997, 1.352276),
    500: (0.899589, 0.998009, 1.107203, 1.155800, 1.212716),
}

# Tanks in series, gamma quantiles: 1 tank at 95 % is -ln 0.05 = 2.995732 by hand.
TANKS = {
    1: (0.051293, 2.995732, 4.605170, 6.907755),
    3: (0.272564, 2.098598, 2.801982, 3.742957),
    10: (0.542541, 1.570522, 1.878312, 2.265737),
    100: (0.841393, 1.169971, 1.247226, 1.337703),
}


@pytest.mark.parametrize(("peclet", "closed", "opened"), VARIANCES)
def test_variances(peclet, closed, opened):
    assert closed_variance(peclet) == pytest.approx(closed, rel=1e-9)
    assert open_variance(peclet) == pytest.approx(opened, rel=1e-9)


def test_variance_of_a_well_stirred_vessel_tends_to_one_without_losing_digits():
    assert closed_variance(1e-6) == pytest.approx(1 - 1e-6 / 3, rel=1e-12)
    assert closed_variance(1.01e-3) == pytest.approx(1 - 1.01e-3 / 3, rel=1e-6)


@pytest.mark.parametrize(
    ("peclet", "theta", "value"), [(pe, theta, value) for pe, row in STEPS.items() for theta, value in row.items()]
)
def test_step_response(peclet, theta, value):
    assert step_response(peclet, theta) == pytest.approx(value, abs=2e-9)


@pytest.mark.parametrize(
    ("peclet", "fraction", "theta"),
    [
        (pe, part, theta)
        for pe, row in WAITS.items()
        for part, theta in zip((0.05, 0.5, 0.95, 0.99, 0.999), row, strict=True)
    ],
)
def test_wait_behind_a_closed_vessel(peclet, fraction, theta):
    assert wait_closed(peclet, fraction) == pytest.approx(theta, abs=2e-6)


@pytest.mark.parametrize(
    ("tanks", "fraction", "theta"),
    [(n, part, theta) for n, row in TANKS.items() for part, theta in zip((0.05, 0.95, 0.99, 0.999), row, strict=True)],
)
def test_wait_behind_tanks(tanks, fraction, theta):
    assert wait_tanks(tanks, fraction) == pytest.approx(theta, abs=1e-6)


def test_a_sharp_front_arrives_at_its_mean_also_at_very_high_peclet():
    """At Pe = 1e4 theta is nearly normal with variance 2/Pe: the 97.725 % point is two deviations late."""
    assert wait_closed(1e4, 0.97725) == pytest.approx(1 + 2 * math.sqrt(2e-4), abs=5e-4)


def test_means_and_variances_of_a_path_add():
    path = series([Spread(60.0, 60.0**2 / 10), Spread(30.0, 0.0), Spread(10.0, 100.0)])
    assert (path.mean_s, path.variance_s2) == (100.0, 460.0)
    assert path.tanks == pytest.approx(100.0**2 / 460.0)
    assert wait_s(path, 0.99) == pytest.approx(100.0 * wait_tanks(path.tanks, 0.99))
    assert wait_s(Spread(50.0, 0.0), 0.99) == 50.0


@pytest.mark.parametrize(
    "call",
    [
        lambda: closed_variance(0.0),
        lambda: open_variance(-1.0),
        lambda: step_response(0.1, 1),
        lambda: wait_closed(10, 1.0),
        lambda: wait_tanks(5, 0.0),
    ],
)
def test_senseless_numbers_are_refused(call):
    with pytest.raises(ValueError, match=r"Peclet|fraction"):
        call()
