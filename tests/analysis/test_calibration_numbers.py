"""Uncertainty, weighing and tracers against published examples and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest

from rigd.analysis.gravimetric import Room, Weighing, at_temperature, delivered, per_gram_mL, water_g_mL
from rigd.analysis.residence import Spread, closed_variance, series, step_response
from rigd.analysis.tracer import peclet_of, pulse, step, without
from rigd.analysis.uncertainty import Part, combine, of_mean, rectangular


def test_the_end_gauge_of_the_gum() -> None:
    """JCGM 100:2008, example H.1, table H.1 and H.1.6 (nm): u_c = 32, nu_eff = 16, U_99 = 93."""
    parts = [Part("standard", 25, 18), Part("difference", 9.7, 25.6), Part("expansion", 2.9, 50), Part("temp", 16.6, 2)]
    found = combine(parts, 0.99)
    assert found.standard == pytest.approx(32, abs=0.5)
    assert math.floor(found.freedom) == 16
    assert found.coverage == pytest.approx(2.92, abs=0.005)
    assert found.expanded == pytest.approx(93, abs=1)


def test_repeats_and_rectangles_of_the_gum() -> None:
    """JCGM 100:2008, 4.4.3 (table 1): twenty temperatures, mean 100.145, s of the mean 0.333; G.2 for t."""
    seen = [96.90, 98.18, 98.25, 98.61, 99.03, 99.49, 99.56, 99.74, 99.89, 100.07,
            100.33, 100.42, 100.68, 100.95, 101.11, 101.20, 101.57, 101.84, 102.36, 102.72]  # fmt: skip
    part = of_mean(seen)
    assert sum(seen) / 20 == pytest.approx(100.145, abs=0.001)
    assert part.standard == pytest.approx(0.333, abs=0.001)
    assert part.freedom == 19
    assert combine([part]).coverage == pytest.approx(2.09, abs=0.005)  # table G.2, nu = 19, 95 %
    assert combine([Part("known", 1.0)]).coverage == pytest.approx(1.960, abs=0.0005)
    assert rectangular(4.0) == pytest.approx(2.3, abs=0.05)  # 4.4.5: a = 4 degC, u = 2.3 degC
    with pytest.raises(ValueError, match="from two on"):
        of_mean([1.0])


Z = {
    20.0: (1.0028, 1.0028, 1.0029, 1.0029), 20.5: (1.0029, 1.0029, 1.0030, 1.0030),
    21.0: (1.0030, 1.0031, 1.0031, 1.0031), 21.5: (1.0031, 1.0032, 1.0032, 1.0032),
    22.0: (1.0032, 1.0033, 1.0033, 1.0033), 22.5: (1.0033, 1.0034, 1.0034, 1.0034),
    23.0: (1.0034, 1.0035, 1.0035, 1.0036), 23.5: (1.0036, 1.0036, 1.0036, 1.0037),
}  # fmt: skip
"""ISO 8655-6:2002, table A.1, uL/mg at 95, 100, 101.3 and 105 kPa (as reprinted in makers' instructions)."""


@pytest.mark.parametrize("temperature_degC", Z)
def test_volume_of_a_gram_of_water_is_the_z_factor(temperature_degC: float) -> None:
    for kPa, expected in zip((95.0, 100.0, 101.3, 105.0), Z[temperature_degC], strict=True):
        room = Room(temperature_degC, 10 * kPa, 0.5)
        assert per_gram_mL(water_g_mL(temperature_degC), room) == pytest.approx(expected, abs=1e-4)


def test_water_and_air_against_published_values() -> None:
    """Water: Tanaka et al. 2001, table 1: 999.8428 at 0, 998.2067 at 20, 995.6488 at 30 degC, 999.9750 at 3.98.
    Air: OIML D 28 takes 1.2 kg/m3 at 20 degC as the conventional one."""
    for t, kg_m3 in ((0.0, 999.8428), (3.98, 999.9750), (20.0, 998.2067), (30.0, 995.6488)):
        assert 1000 * water_g_mL(t) == pytest.approx(kg_m3, abs=0.0006)
    assert 1000 * Room(20.0, 1013.25, 0.5).air_g_mL == pytest.approx(1.2, abs=0.002)


def test_a_pump_that_gives_two_percent_more_is_found_within_its_uncertainty() -> None:
    chance, room = np.random.default_rng(4), Room()
    density = water_g_mL(22.0)
    inside = 0
    for _ in range(400):
        true_mL = 2.0 * 1.02 + chance.normal(0, 0.004, 6)
        masses = np.round(true_mL / per_gram_mL(density, room), 4)
        found = delivered(Weighing(2.0, tuple(masses), density, 1e-5, readability_g=1e-4), room)
        inside += abs(found.factor - 1.02) <= found.uncertainty.expanded
    assert inside / 400 == pytest.approx(0.95, abs=0.03)


def test_buoyancy_is_a_tenth_of_a_percent_and_evaporation_is_added() -> None:
    water = water_g_mL(22.0)
    assert per_gram_mL(water, Room()) * water - 1 == pytest.approx(0.00105, abs=0.0001)
    dry = delivered(Weighing(1.0, (0.99, 0.99, 0.99), water, 1e-5))
    lost = delivered(Weighing(1.0, (0.98, 0.98, 0.98), water, 1e-5, evaporated_g=0.01))
    assert lost.factor == pytest.approx(dry.factor)
    assert lost.uncertainty.expanded > dry.uncertainty.expanded


@pytest.mark.parametrize(
    ("masses", "said"), [((1.0, 1.0), "too few"), ((1.0, 1.0, 1.6), "look at units"), ((1e-3,) * 3, "look at")]
)
def test_weighings_that_say_nothing_are_refused(masses: tuple[float, ...], said: str) -> None:
    with pytest.raises(ValueError, match=said):
        delivered(Weighing(0.9, masses, 0.789, 1e-4))


def test_between_the_temperatures_of_a_property_set() -> None:
    parabola = tuple(1.0 - 1e-3 * t - 1e-6 * t * t for t in (0.0, 25.0, 60.0))
    value, slope = at_temperature(parabola, 40.0)  # type: ignore[arg-type]
    assert value == pytest.approx(1.0 - 0.04 - 1.6e-3)
    assert slope == pytest.approx(-1e-3 - 2e-6 * 40)


def test_moments_of_stirred_tanks_in_series() -> None:
    """n tanks: mean tau, variance tau^2/n (Levenspiel, 14.1), by pulse and by step."""
    t = np.linspace(0, 600, 6001)
    mean, n = 60.0, 5
    curve = t ** (n - 1) * np.exp(-n * t / mean)
    found = pulse(t.tolist(), (3 + 0.01 * curve / curve.max()).tolist())
    assert (found.mean_s, found.tanks) == (pytest.approx(60, rel=1e-3), pytest.approx(5, rel=1e-2))
    rise = np.cumsum(curve) / curve.sum()
    found = step(t.tolist(), (7 - 2 * rise).tolist())
    assert (found.mean_s, found.tanks) == (pytest.approx(60, rel=2e-3), pytest.approx(5, rel=1e-2))


@pytest.mark.parametrize("peclet", [8.0, 40.0, 200.0])
def test_a_dispersed_plug_gives_its_peclet_number_back(peclet: float) -> None:
    theta = np.linspace(0, 5, 501)
    response = [0.0 if one == 0 else step_response(peclet, float(one)) for one in theta]
    found = step((100 * theta).tolist(), response)
    assert found.mean_s == pytest.approx(100, rel=2e-3)
    assert peclet_of(found) == pytest.approx(peclet, rel=0.03)
    assert peclet_of(Spread(1.0, closed_variance(peclet))) == pytest.approx(peclet, rel=1e-6)


def test_what_went_in_is_taken_off() -> None:
    inlet, segment = Spread(5.0, 4.0), Spread(20.0, 9.0)
    assert without(series((inlet, segment)), inlet) == segment
    with pytest.raises(ValueError, match="exchanged"):
        without(inlet, segment)
    assert peclet_of(Spread(1.0, 0.0)) == math.inf
    with pytest.raises(ValueError, match="dead zones"):
        peclet_of(Spread(1.0, 1.5))


def test_curves_that_were_cut_off_are_refused() -> None:
    t = [float(i) for i in range(100)]
    with pytest.raises(ValueError, match="flat"):
        pulse(t, [math.exp(-((i - 95) ** 2) / 200) for i in t])
    with pytest.raises(ValueError, match="flat"):
        step(t, t)
    with pytest.raises(ValueError, match="rise"):
        step(t[::-1], t)
