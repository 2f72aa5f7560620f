"""Instruments against closed forms: lag, white noise, slow drift, quantisation, failure levels, stray light."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from fakes.config_files import RIG, rig_problems_of, within, write
from fakes.sim_rigs import pressure_tag, temperature_tag

from rigd.config import load_rig
from rigd_sim.plant.instruments import HEALTHY, WANDER_S, Noise, Sensor


def sensor(**changes: object) -> Sensor:
    """A pressure sensor 0..25 bar at a place that holds 10 bar."""
    return Sensor(replace(pressure_tag("PT", "TEE", "p"), **changes), lambda: 10.0)  # type: ignore[arg-type]


def test_a_first_order_lag_shows_632_per_mille_after_its_time_constant() -> None:
    """1 - 1/e = 0.6321 at t = tau, 0.9502 at 3 tau (any text on first-order systems), at any step."""
    place = [0.0]
    for steps in (1, 7, 300):
        place[0] = 0.0
        thermometer = Sensor(replace(temperature_tag("TT", "COL.middle", "t"), lag_s=3.0), lambda: place[0])
        thermometer.advance(0.0)
        place[0] = 100.0
        for _ in range(steps):
            thermometer.advance(3.0 / steps)
        assert thermometer.shown == pytest.approx(63.2120559, rel=1e-6)
        for _ in range(steps):
            thermometer.advance(6.0 / steps)
        assert thermometer.shown == pytest.approx(95.0212932, rel=1e-6)


def test_white_noise_has_the_declared_deviation_and_no_memory() -> None:
    """Standard deviation within 3 % of 4 000 readings (its own is 1.1 %); lag-one correlation within 3/sqrt(n)."""
    noisy, noise = sensor(noise=0.05), Noise(3)
    values = np.array([noisy.read(10.0, noise, HEALTHY, 22.0).value for _ in range(4000)])
    assert values.std() == pytest.approx(0.05, rel=0.03)
    around = values - values.mean()
    assert abs(float(around[1:] @ around[:-1] / (around @ around))) < 3 / math.sqrt(4000)


@pytest.mark.parametrize("step_s", [1.0, 60.0])
def test_slow_drift_has_its_deviation_and_its_memory(step_s: float) -> None:
    """Ornstein-Uhlenbeck: deviation as declared, correlation exp(-dt/tau), whatever the step."""
    drifting, noise = sensor(wander=0.2), Noise(5)
    values = []
    for _ in range(200_000 if step_s < 10 else 20_000):
        drifting.wander(step_s, noise)
        values.append(drifting.wandered)
    seen = np.array(values)
    lag = round(WANDER_S / step_s)
    assert seen.std() == pytest.approx(0.2, rel=0.12)
    assert float(np.corrcoef(seen[lag:], seen[:-lag])[0, 1]) == pytest.approx(math.exp(-1.0), abs=0.12)


def test_readings_stand_on_the_steps_of_the_converter() -> None:
    """16 mA over 40 000 steps: a span of 25 bar has steps of 0.625 mbar, and rounding is to the nearest."""
    plain, noise = sensor(noise=0.0), Noise(1)
    for value in (0.0, 1.23456, 24.99999):
        read = plain.read(value, noise, HEALTHY, 22.0)
        assert read.raw == round(10_000 + 40_000 * value / 25.0)
        assert abs(read.value - value) <= 0.5 * 25.0 / 40_000 + 1e-12


@pytest.mark.parametrize(
    ("milliampere", "word"), [(3.59, "LOW"), (3.61, ""), (20.5, ""), (20.99, ""), (21.01, "HIGH"), (22.0, "HIGH")]
)
def test_failure_levels(milliampere: float, word: str) -> None:
    """NAMUR NE 43: failure below 3.6 mA and above 21 mA; between, the current stands for a value."""
    value = 25.0 * (milliampere - 4.0) / 16.0
    assert sensor(noise=0.0).read(value, Noise(1), HEALTHY, 22.0).fault == word


def test_wander_is_declared_in_the_unit_of_the_sensor(tmp_path: Path) -> None:
    folder = tmp_path
    (edit,) = within("PT-1", 'noise = "10 mbar"', 'noise = "10 mbar"\nwander = "20 mbar"')
    rig = load_rig(write(folder, RIG.replace(*edit))[0])
    assert rig.tag("PT-1").wander == pytest.approx(0.02)
    (wrong,) = within("PT-1", 'noise = "10 mbar"', 'noise = "10 mbar"\nwander = "2 K"')
    found = [(p.code, p.key) for p in rig_problems_of(folder, RIG.replace(*wrong))]
    assert ("unit-wrong", "sensors[PT-1].wander") in found
