"""Closed forms of residence time, kinetics, ramps and heat against published and recomputed values."""

from __future__ import annotations

import math

import pytest

from rigd_sim.physics import heat, kinetics, ramps, residence
from rigd_sim.physics.tubing import pure_convection_step

EXACT = 1e-6


@pytest.mark.parametrize(
    ("pe", "closed", "opened"),
    [
        (1, 0.7357588823, 10),
        (5, 0.3205390358, 0.72),
        (10, 0.1800009080, 0.28),
        (50, 0.0392, 0.0432),
        (1000, 0.001998, 0.002008),
    ],
)
def test_variances(pe: float, closed: float, opened: float) -> None:
    """O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 13; E. T. van der Laan 1958."""
    assert residence.variance_closed(pe) == pytest.approx(closed, rel=EXACT)
    assert residence.variance_open(pe) == pytest.approx(opened, rel=EXACT)


DANCKWERTS = {
    0.001: (0.6666481528, 0.4999583451, 0.3332592868, 0.1665510062),
    1: (0.6519768396, 0.4676558815, 0.2793870464, 0.0984888974),
    5: (0.6280795646, 0.4166152963, 0.2044075244, 0.0388567838),
    20: (0.6134502073, 0.3842245994, 0.1589402259, 0.0154211575),
    100: (0.6080189676, 0.3714684754, 0.1405918325, 0.0084437175),
    1000: (0.6066820085, 0.3682464032, 0.1358750061, 0.0069066440),
}


@pytest.mark.parametrize("pe", DANCKWERTS)
def test_danckwerts(pe: float) -> None:
    """P. V. Danckwerts 1953; J. F. Wehner, R. H. Wilhelm 1956; 30-digit recomputation."""
    for da, expected in zip((0.5, 1, 2, 5), DANCKWERTS[pe], strict=True):
        assert residence.danckwerts(pe, da) == pytest.approx(expected, rel=EXACT)


def test_danckwerts_does_not_overflow() -> None:
    """The textbook form overflows above Pe 1400; the limit is plug flow."""
    assert residence.danckwerts(1e6, 1.0) == pytest.approx(math.exp(-1), rel=1e-5)


def test_fogler_dispersion_example() -> None:
    """H. S. Fogler, Elements of Chemical Reaction Engineering, ch. 14: mean 5.15 min, variance 6.1, k 0.25: X 0.68."""
    pe = residence.peclet_of_variance(6.1 / 5.15**2)
    assert pe == pytest.approx(7.543788, rel=EXACT)
    assert 1 - residence.danckwerts(pe, 0.25 * 5.15) == pytest.approx(0.679482, rel=1e-5)
    assert 1 - residence.tanks_first_order(5.15**2 / 6.1, 0.25 * 5.15) == pytest.approx(0.676235, rel=1e-5)


BRENNER = {
    5: (0.1568059343, 0.3968154908, 0.6025010782, 0.7474311619, 0.8421936610, 0.9396013290, 0.9913184273),
    10: (0.0681142060, 0.3118168214, 0.5803326769, 0.7706260457, 0.8820556743, 0.9715276706, 0.9985420232),
    20: (0.0151487666, 0.2128509743, 0.5598891951, 0.8118166710, 0.9319100939, 0.9932152588, 0.9999571208),
    50: (0.0002423482, 0.0858046843, 0.5390884762, 0.8911930930, 0.9849728826, 0.9998849373, 0.9999999986),
}
THETAS = (0.5, 0.75, 1.0, 1.25, 1.5, 2.0, 3.0)


@pytest.mark.parametrize("pe", BRENNER)
def test_step_response(pe: int) -> None:
    """H. Brenner, Chem. Eng. Sci. 17 (1962) 229-243; agrees with numerical Laplace inversion to 12 digits."""
    for theta, expected in zip(THETAS, BRENNER[pe], strict=True):
        assert residence.step_closed(pe, theta) == pytest.approx(expected, abs=2e-7)


def test_semi_infinite_forms() -> None:
    """A. Ogata, R. B. Banks 1961; L. Lapidus, N. R. Amundson 1952, both recomputed by transform inversion."""
    assert residence.ogata_banks(10, 0.5) == pytest.approx(0.0800667526, rel=EXACT)
    assert residence.ogata_banks(100, 1.5) == pytest.approx(0.9984802827, rel=EXACT)
    for theta, expected in ((0.5, 0.0480702767), (1.0, 0.4930580737), (2.0, 0.9485147100)):
        assert residence.flux_resident(10, theta) == pytest.approx(expected, rel=EXACT)


def test_tanks() -> None:
    """(1 + Da/N)^-N, exact."""
    assert residence.tanks_first_order(5, 1) == pytest.approx(0.4018775720, rel=EXACT)
    assert residence.tanks_first_order(20, 5) == pytest.approx(0.0115292051, rel=EXACT)


@pytest.mark.parametrize(
    ("k", "a", "b", "tau", "x"),
    [
        (0.01, 0.5, 0.5, 300, 0.6),
        (0.01, 0.5, 0.55, 300, 0.6403106282),
        (0.01, 0.5, 0.75, 300, 0.7701677802),
        (0.01, 0.5, 0.4, 300, 0.5090162096),
        (0.02, 0.25, 1.25, 120, 0.9260845456),
        (0.001, 1.0, 1.1, 1800, 0.6844819709),
    ],
)
def test_second_order(k: float, a: float, b: float, tau: float, x: float) -> None:
    """O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 3; integrator agrees to 1e-10."""
    assert kinetics.second_order(k, a, b, tau) == pytest.approx(x, rel=EXACT)


def test_reversible() -> None:
    """Exact integral; equilibrium ceilings with K = 4 (M. Berthelot, L. Pean de Saint-Gilles 1862 for the constant)."""
    assert kinetics.reversible_second_order(1e-4, 4.0, 8.7, 8.7, 600.0) == pytest.approx(0.337950579, rel=EXACT)
    assert kinetics.reversible_second_order(1e-4, 4.0, 2.0, 15.0, 600.0) == pytest.approx(0.573614086, rel=EXACT)
    for ratio, x in ((1, 2 / 3), (2, 0.845299), (3, 0.902833), (5, 0.944950), (10, 0.973739)):
        assert kinetics.equilibrium_conversion(4.0, ratio) == pytest.approx(x, rel=EXACT)


def test_series_parallel() -> None:
    """O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 8."""
    for r, left, best in (
        (0.05, 0.04270657, 0.85413150),
        (0.2, 0.13374806, 0.66874030),
        (0.5, 0.25, 0.5),
        (2, 0.5, 0.25),
    ):
        assert kinetics.series_parallel_best(r) == pytest.approx((left, best), rel=EXACT)
    assert kinetics.series_parallel(0.1, 0.1) == pytest.approx(0.77147582, rel=EXACT)
    assert kinetics.series_parallel(0.01, 0.2) == pytest.approx(0.48513396, rel=EXACT)


@pytest.mark.parametrize(("ea", "factor"), [(40, 5.4477), (58, 11.6818), (80, 29.677), (108, 97.224)])
def test_arrhenius(ea: float, factor: float) -> None:
    """k(60)/k(25) with R = 8.314462618 J/(mol K)."""
    assert kinetics.arrhenius_factor(ea, 333.15, 298.15) == pytest.approx(factor, rel=1e-4)


@pytest.mark.parametrize(
    ("phi", "eta"),
    [(0.1, 0.9993339676), (1, 0.9391058565), (3, 0.6716364900), (10, 0.2700000012), (20, 0.1425), (0.898587, 0.95)],
)
def test_effectiveness(phi: float, eta: float) -> None:
    """E. W. Thiele 1939; sphere, first order."""
    assert kinetics.effectiveness(phi) == pytest.approx(eta, rel=EXACT)


def test_fogler_two_sizes() -> None:
    """H. S. Fogler, Weisz-Prater example: radii 10:1, rates 1:5: phi 1.645614 and 16.456138, eta 0.856123, 0.171225."""
    small, large = kinetics.effectiveness(1.645614), kinetics.effectiveness(16.456138)
    assert (small, large) == pytest.approx((0.856123, 0.171225), rel=EXACT * 5)
    assert small / large == pytest.approx(5.0, rel=1e-5)


def test_laminar_reactors() -> None:
    """K. G. Denbigh, J. Appl. Chem. 1 (1951) 227: no diffusion; quadrature and closed form."""
    for da, left in ((0.5, 0.649368251956), (1, 0.443208728550), (2, 0.219383934396)):
        assert kinetics.convective_first_order(da) == pytest.approx(left, rel=EXACT)
    for da, left in ((1, 0.549306144334), (2, 0.386294361120), (5, 0.205902957765)):
        assert kinetics.convective_second_order(da) == pytest.approx(left, rel=EXACT)
    assert pure_convection_step(1.0) == 0.75


@pytest.mark.parametrize(
    ("t", "tau"), [(5, 1.071767416), (10, 1.164505243), (30, 1.775208649), (50, 3.609208434), (60, 6.666666667)]
)
def test_flow_ramp(t: float, tau: float) -> None:
    """Exact volume mapping of a linear flow ramp 1 -> 0.1 mL/min over 1 mL, and its differential form."""
    assert ramps.linear_flow_residence(1.0, -0.015, 1.0, t) == pytest.approx(tau, rel=1e-8)
    h = 1e-5
    slope = (
        ramps.linear_flow_residence(1.0, -0.015, 1.0, t + h) - ramps.linear_flow_residence(1.0, -0.015, 1.0, t - h)
    ) / (2 * h)
    assert slope == pytest.approx(1 - (1 - 0.015 * t) / (1 - 0.015 * (t - tau)), abs=1e-5)


@pytest.mark.parametrize(("alpha", "s"), [(0.1, 0.0951625820), (0.25, 0.2211992169), (1.0, 0.6321205588)])
def test_residence_time_ramp(alpha: float, s: float) -> None:
    """Slope 1 - e^-alpha (relation of J. S. Moore, K. F. Jensen 2014, derived)."""
    assert ramps.linear_tau_slope(alpha) == pytest.approx(s, rel=1e-9)


def test_heat() -> None:
    """Nu 3.66 (library ``ht``); adiabatic rises and ramp lags are plain arithmetic."""
    assert heat.laminar_coefficient(0.607, 1e-3) == pytest.approx(2222, rel=1e-3)
    for dh, c, rho, cp, rise in (
        (-100e3, 1e3, 786, 1990, 63.93),
        (-60e3, 500, 997, 4180, 7.199),
        (-20e3, 2e3, 800, 2200, 22.73),
    ):
        assert heat.adiabatic_rise(dh, c, rho, cp) == pytest.approx(rise, rel=1e-3)
    assert heat.lag_under_ramp(2 / 60, 120) == pytest.approx(4.0)
    assert heat.jacketed_outlet(20.0, 60.0, 36.18) == pytest.approx(60.0, abs=1e-9)
