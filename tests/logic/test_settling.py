"""The ratio test against its published and recomputed distribution, and the gate as a whole.

Distribution of R for white noise, filter factors 0.2/0.1/0.1, 400 steps of burn-in, from Monte Carlo (recomputed; the
95 % point 1.44 agrees with Cao & Rhinehart, J. Process Control 7 (1997) 149-152). Arrays of replicates go through the
very function that the daemon uses.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from rigd.logic.settling import (
    RATIO_LIMIT,
    RatioFilter,
    Settler,
    SettleRule,
    is_steady,
    ratio_limits,
    ratio_over,
    ratio_start,
    ratio_step,
    settle_step,
    trend,
)

REPLICATES = 60_000
SECOND_NS = 1_000_000_000


def ratios(rho: float = 0.0, slope: float = 0.0, steps: int = 400, factors: Any = (0.2, 0.1, 0.1)) -> Any:
    """R of many replicates after ``steps`` samples of AR(1) noise (unit variance) on a ramp."""
    rng = np.random.Generator(np.random.PCG64(1))
    noise = rng.standard_normal(REPLICATES)
    state: RatioFilter = ratio_start(noise)  # type: ignore[arg-type]
    for i in range(1, steps):
        noise = rho * noise + np.sqrt(1 - rho**2) * rng.standard_normal(REPLICATES)
        state = ratio_step(state, noise + slope * i, factors)  # type: ignore[arg-type]
    return (2 - factors[0]) * np.asarray(state.nu2) / np.asarray(state.delta2)


@pytest.fixture(scope="module")
def white() -> Any:
    return ratios()


QUANTILES = [(0.5, 0.692), (1, 0.711), (5, 0.771), (10, 0.810), (50, 0.999), (90, 1.316), (95, 1.440), (99, 1.733)]


@pytest.mark.parametrize(("percent", "expected"), QUANTILES)
def test_distribution_of_the_ratio(white: Any, percent: float, expected: float) -> None:
    """Tolerance: four standard errors of a quantile from this many replicates, at most 1.5 %."""
    assert np.percentile(white, percent) == pytest.approx(expected, rel=0.015)


def test_mean_ratio(white: Any) -> None:
    assert float(np.mean(white)) == pytest.approx(1.039, abs=0.005)


@pytest.mark.parametrize(("limit", "rate", "spread"), [(1.5, 0.0357, 0.003), (2.0, 0.00239, 0.0008)])
def test_type_one_rates(white: Any, limit: float, rate: float, spread: float) -> None:
    assert float(np.mean(white > limit)) == pytest.approx(rate, abs=spread)


def test_low_side_acceptance(white: Any) -> None:
    assert float(np.mean(white < 0.8)) == pytest.approx(0.086, abs=0.005)


def test_our_limit_rejects_five_percent_of_steady_samples(white: Any) -> None:
    assert float(np.mean(white > RATIO_LIMIT)) == pytest.approx(0.05, abs=0.004)


@pytest.mark.parametrize(("rho", "median"), [(0.3, 1.30), (0.6, 1.86), (0.9, 3.3)])
def test_autocorrelated_noise_raises_the_ratio(rho: float, median: float) -> None:
    assert float(np.median(ratios(rho))) == pytest.approx(median, rel=0.02)


@pytest.mark.parametrize(("slope", "missed", "spread"), [(0.05, 0.994, 0.003), (0.2, 0.558, 0.02), (0.5, 0.0, 0.001)])
def test_slow_ramps_that_the_ratio_misses(slope: float, missed: float, spread: float) -> None:
    """P(R < 2) on a ramp of ``slope`` noise deviations per sample: why the ratio alone is not enough."""
    assert float(np.mean(ratios(slope=slope) < 2.0)) == pytest.approx(missed, abs=spread)


def test_smaller_factors_see_the_slow_ramp() -> None:
    missed = float(np.mean(ratios(slope=0.05, factors=(0.05, 0.05, 0.05)) < 1.5))
    assert missed == pytest.approx(0.083, abs=0.01)


def test_order_of_the_recursion() -> None:
    """By hand: nu2 must use the filtered value from before the sample."""
    state = ratio_step(ratio_start(0.0), 1.0)
    assert state.nu2 == pytest.approx(0.1)
    assert state.filtered == pytest.approx(0.2)
    state = ratio_step(state, 1.0)
    assert state.nu2 == pytest.approx(0.1 * 0.64 + 0.9 * 0.1)
    assert state.delta2 == pytest.approx(0.9 * 0.1)


def test_trend_is_least_squares() -> None:
    rng = np.random.default_rng(3)
    t = np.arange(12.0) * 5
    v = 0.3 + 0.01 * t + rng.normal(0, 0.02, 12)
    found = trend(tuple(zip(t.tolist(), v.tolist(), strict=True)))
    (slope, _), covariance = np.polyfit(t, v, 1, cov="unscaled")
    residual = v - np.polyval(np.polyfit(t, v, 1), t)
    error = np.sqrt(covariance[0, 0] * np.sum(residual**2) / 10)
    assert (found.slope, found.error) == (pytest.approx(slope), pytest.approx(error))
    assert found.significant


RULE = SettleRule(tolerance=0.01, horizon_s=60.0, window=12, persistence=3)


def run(values: Any, rule: SettleRule = RULE) -> Settler:
    settler = Settler()
    for i, value in enumerate(values):
        settler = settle_step(settler, rule, (i + 1) * 5 * SECOND_NS, float(value))
        if is_steady(settler, rule):
            break
    return settler


@pytest.mark.parametrize("count", [12, 24, 36, 60])
def test_limits_of_a_short_memory_keep_the_type_one_rates(count: int) -> None:
    """5 % and 1 %; 4000 replicates through the daemon's own function, so four standard errors are 0.014 and 0.006."""
    rng = np.random.default_rng(4)
    rows = rng.standard_normal((4000, count)).tolist()
    found = [ratio_over(tuple(row)) or 0.0 for row in rows]
    accept, reject = ratio_limits(count)
    assert sum(ratio > accept for ratio in found) / 4000 == pytest.approx(0.05, abs=0.014)
    assert sum(ratio > reject for ratio in found) / 4000 == pytest.approx(0.01, abs=0.006)


def noise(n: int, sigma: float, seed: int = 5) -> Any:
    return np.random.default_rng(seed).normal(0, sigma, n)


def test_quiet_signal_becomes_steady() -> None:
    settler = run(0.5 + noise(60, 0.002))
    assert is_steady(settler, RULE)
    assert settler.count >= RULE.window + RULE.persistence - 1


def test_frozen_signal_is_never_steady() -> None:
    settler = run([0.5] * 200)
    assert (settler.verdict, settler.run) == ("frozen", 0)


def test_signal_that_freezes_later_is_not_steady_either() -> None:
    moving = 0.5 + noise(7, 0.002)
    settler = run([*moving, *([0.5] * 100)])
    assert settler.verdict == "frozen"


def test_ramp_below_the_noise_is_not_proven_steady() -> None:
    """0.1 noise deviations per sample, 1.2 % over the horizon: the ratio passes 97 % of such samples."""
    rule = SettleRule(tolerance=0.01, horizon_s=150.0, window=12, persistence=3)
    ramp = 0.5 + 0.0004 * np.arange(100)
    wrong = sum(is_steady(run(ramp + noise(100, 0.004, seed), rule), rule) for seed in range(100))
    assert wrong <= 5


def test_noise_too_large_for_the_tolerance_is_unproven() -> None:
    settler = run(0.5 + noise(40, 0.05))
    assert settler.verdict in ("unproven", "moving")


def test_step_response_waits_for_its_plateau() -> None:
    t = np.arange(200) * 5.0
    values = 0.8 * (1 - np.exp(-t / 100)) + noise(200, 0.002)
    settler = run(values)
    assert is_steady(settler, RULE)
    assert 0.8 - settler.trend.mean < 0.02
    assert settler.count * 5 > 250


def test_blocks_average_the_noise_away() -> None:
    rule = SettleRule(tolerance=0.01, horizon_s=600.0, window=12, persistence=2, block=10)
    values = 0.5 + noise(400, 0.01)
    assert is_steady(run(values, rule), rule)
    assert not is_steady(run(values[:100], SettleRule(0.01, 600.0, 12, 2)), SettleRule(0.01, 600.0, 12, 2))


def test_false_alarms_of_the_whole_gate_only_delay() -> None:
    """Two hundred steady signals: all are accepted, most of them soon."""
    counts = [run(0.5 + noise(100, 0.002, seed)).count for seed in range(200)]
    assert max(counts) < 100
    assert float(np.median(counts)) <= 16


def test_a_quiet_instrument_sees_a_drift_that_does_not_matter() -> None:
    """3e-5/s against a tolerance of 1 % over 90 s, forty noise deviations in a window: proven small, so steady."""
    values = 0.28 - 3e-5 * 5.0 * np.arange(40) + noise(40, 4e-5)
    settler = run(values)
    assert is_steady(settler, RULE)
    assert ratio_over(settler.raw) > ratio_limits(len(settler.raw))[1]  # type: ignore[operator]


def test_the_same_drift_over_what_is_still_to_come_is_not_steady() -> None:
    """The same slope: 1.1 % from the middle of the window to the end of a horizon of 350 s."""
    values = 0.28 - 3e-5 * 5.0 * np.arange(40) + noise(40, 4e-5)
    settler = run(values, SettleRule(tolerance=0.01, horizon_s=350.0, window=12, persistence=3))
    assert not is_steady(settler, RULE)


def test_the_mean_of_the_window_counts_besides_the_horizon() -> None:
    """2e-4/s over 1 s is nothing, but the mean of a window of 110 s lies 1.1 % behind what is collected."""
    values = 0.28 + 2e-4 * 5.0 * np.arange(60) + noise(60, 4e-5)
    assert not is_steady(run(values, SettleRule(0.01, 1.0, 24, 3)), RULE)
    assert is_steady(run(values, SettleRule(0.02, 1.0, 24, 3)), RULE)


def test_a_bend_that_matters_is_moving_however_flat_its_line() -> None:
    """A hump of 2 % over the window: least squares sees no slope in it."""
    t = np.arange(12)
    hump = 0.5 + 0.02 * np.sin(np.pi * t / 11) + noise(12, 2e-4)
    settler = Settler()
    for i, value in enumerate(hump):
        settler = settle_step(settler, RULE, (i + 1) * 5 * SECOND_NS, float(value))
    assert settler.verdict == "moving"
