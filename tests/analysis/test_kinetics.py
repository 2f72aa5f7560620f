"""Plug-flow closed forms against integrated equations, and the rate constant that a sweep gives back."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from rigd.analysis.fitting import FitError
from rigd.analysis.kinetics import Feed, Law, conversion, feed_after_tee, fit_rate_constant, law_of
from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace

# Levenspiel, 3rd ed., ch. 3 and 5: A + B, second order, plug flow; recomputed, an ODE solver agreed to 1e-10.
SECOND_ORDER = [
    (0.01, 0.5, 0.5, 300, 0.6000000000),
    (0.01, 0.5, 0.55, 300, 0.6403106282),
    (0.01, 0.5, 0.75, 300, 0.7701677802),
    (0.01, 0.5, 0.4, 300, 0.5090162096),
    (0.02, 0.25, 1.25, 120, 0.9260845456),
    (0.001, 1.0, 1.1, 1800, 0.6844819709),
]


@pytest.mark.parametrize(("k", "a", "b", "tau", "expected"), SECOND_ORDER)
def test_second_order_unequal_feeds(k, a, b, tau, expected):
    assert conversion(Law.SECOND, k, tau, Feed(a, b)) == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize(("a", "b", "expected"), [(8.7, 8.7, 0.337950579), (2.0, 15.0, 0.573614086)])
def test_reversible(a, b, expected):
    """k = 1e-4 L/(mol s), K = 4, 600 s; recomputed, an ODE solver agreed."""
    assert conversion(Law.REVERSIBLE, 1e-4, 600.0, Feed(a, b), 4.0) == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize(
    ("ratio", "expected"), [(1, 2 / 3), (2, 0.845299), (3, 0.902833), (5, 0.944950), (10, 0.973739)]
)
def test_reversible_ends_at_equilibrium(ratio, expected):
    """Equilibrium conversions at K = 4; two thirds for equal feeds is Berthelot and Pean de Saint-Gilles (1862)."""
    assert conversion(Law.REVERSIBLE, 1.0, 1e6, Feed(1.0, ratio), 4.0) == pytest.approx(expected, abs=1e-6)


@settings(max_examples=25, deadline=None)
@given(st.floats(0.2, 3.0), st.floats(0.2, 16.0), st.floats(0.05, 50.0), st.floats(10, 600))
def test_reversible_is_what_an_integrator_finds(a, b, constant, tau):
    """Independent route: Runge-Kutta (scipy solve_ivp) on dx/dt = k [(a - x)(b - x) - x^2 / K]."""
    k = 2e-3
    path = solve_ivp(
        lambda _, x: k * ((a - x) * (b - x) - x * x / constant),
        (0, tau),
        [0.0],
        rtol=1e-10,
        atol=1e-12,
        method="DOP853",
    )
    assert conversion(Law.REVERSIBLE, k, tau, Feed(a, b), constant) == pytest.approx(path.y[0, -1] / a, abs=1e-7)


def test_the_limits_join():
    assert conversion(Law.REVERSIBLE, 1e-3, 200.0, Feed(1, 2), 1.0) == pytest.approx(
        conversion(Law.REVERSIBLE, 1e-3, 200.0, Feed(1, 2), 1.0 + 1e-7), abs=1e-8
    )
    assert conversion(Law.SECOND, 1e-3, 200.0, Feed(1, 1)) == pytest.approx(
        conversion(Law.SECOND, 1e-3, 200.0, Feed(1, 1 + 2e-6)), abs=1e-6
    )
    assert conversion(Law.SECOND, 1.0, 1e5, Feed(1.0, 16.0)) == 1.0
    assert conversion(Law.FIRST, 0.02, 50.0) == pytest.approx(1 - math.exp(-1))


@pytest.mark.parametrize("law", [Law.FIRST, Law.SECOND, Law.REVERSIBLE])
def test_a_sweep_gives_back_its_rate_constant(law):
    tau = [30.0, 45.0, 70.0, 110.0, 160.0, 240.0]
    feed, k = Feed(1.0, 16.0), 0.001625
    exact = [conversion(law, k, time, feed, 4.0) for time in tau]
    found = fit_rate_constant(law, tau, exact, [feed] * 6, 4.0)
    assert found.k == pytest.approx(k, rel=1e-9)
    assert found.k_error < 1e-9


@pytest.mark.slow
def test_error_of_the_rate_constant_covers_the_truth():
    """300 seeds, 1 % noise: about 68 % of fits lie within one standard error of the truth (t with 5 degrees: 64 %)."""
    tau, feed = np.array([30.0, 45.0, 70.0, 110.0, 160.0, 240.0]), Feed(1.0, 16.0)
    exact = np.array([conversion(Law.REVERSIBLE, 0.0004, time, feed, 4.0) for time in tau])
    chance, inside = np.random.default_rng(11), 0
    for _ in range(300):
        found = fit_rate_constant(Law.REVERSIBLE, tau, exact + chance.normal(0, 0.01, 6), [feed] * 6, 4.0)
        inside += abs(found.k - 0.0004) < found.k_error
    assert 0.637 - 0.09 < inside / 300 < 0.637 + 0.09


def test_one_point_is_refused():
    with pytest.raises(FitError, match="two points"):
        fit_rate_constant(Law.FIRST, [10.0], [0.5])


def chemistry(law: RateLaw, orders: dict[str, float], reverse: dict[str, float] | None = None, **extra) -> Chemistry:
    stoichiometry = dict.fromkeys(orders, -1.0) | {"P": 1.0}
    reaction = Reaction(
        "r", stoichiometry, law, ReactionPlace.CATALYST, 1.0, 60.0, 50.0, orders, reverse or {}, **extra
    )
    return Chemistry("c", (), (reaction,), "A", "P")


@pytest.mark.parametrize(
    ("declared", "expected"),
    [
        (chemistry(RateLaw.POWER, {"A": 1}), (Law.FIRST, "", 0.0)),
        (chemistry(RateLaw.POWER, {"A": 1, "B": 1}), (Law.SECOND, "B", 0.0)),
        (chemistry(RateLaw.POWER, {"A": 2}), (Law.APPARENT, "", 0.0)),
        (chemistry(RateLaw.LHHW, {"A": 1, "B": 1}), (Law.APPARENT, "", 0.0)),
        (chemistry(RateLaw.POWER, {"A": 1}, per_gram=True), (Law.APPARENT, "", 0.0)),
        (
            chemistry(RateLaw.REVERSIBLE, {"A": 1, "B": 1}, {"P": 1, "W": 1}, equilibrium_constant=4.0),
            (Law.REVERSIBLE, "B", 4.0),
        ),
    ],
)
def test_the_law_comes_from_the_chemistry_file(declared, expected):
    assert law_of(declared) == expected


def test_feeds_mix_by_flow():
    liquids = {"PU-A": {"acid": 2.0, "ethanol": 15.0}, "PU-B": {"ethanol": 17.0}}
    assert feed_after_tee({"PU-A": 1.0, "PU-B": 3.0}, liquids, "acid", "ethanol") == Feed(0.5, 16.5)
    with pytest.raises(FitError, match="no flow"):
        feed_after_tee({"PU-A": 0.0}, liquids, "acid", "")
