"""When is a noisy signal steady? Two tests that must agree, sample by sample.

The ratio test of Cao & Rhinehart, J. Process Control 5 (1995) 363-374, vetoes: two estimates of the variance, one of
which a trend inflates. The equivalence test (two one-sided t-tests on the slope of a window) proves: steady only when
the change projected from the middle of the window to the end of what is still to come is *shown* to be below a
tolerance. Not rejecting a trend proves nothing. A signal that has not moved at all for half a window is frozen and
never steady. Weak points of the ratio: autocorrelated noise raises it, so it errs towards waiting; and the quieter an
instrument is, the smaller the drift that it vetoes. Where the whole window lies so close to a line that no bend of it
can matter, the veto is void and the proof alone decides.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from rigd.logic.student import t_quantile

RATIO_LIMIT = 1.44
"""95 % point of the ratio under white noise for the filter factors below (J. Process Control 7 (1997) 149-152)."""

REJECT_LIMIT = 1.73
"""99 % point under white noise, recomputed. What was accepted stays so up to here: two limits do not flicker."""

SHORT_LIMITS = ((16, 1.75, 2.37), (30, 1.50, 1.85), (48, 1.46, 1.76))
"""95 % and 99 % points after fewer than so many values, own Monte Carlo (2e5 replicates at 12, 24 and 36)."""

RATIO_MEMORY = 60
"""Samples over which the gate takes the ratio, at most."""

SMALL = 0.25
"""Part of the tolerance within which a whole window may lie about its line for no bend in it to matter (own rule)."""

CONFIDENCE = 0.95
"""Of each of the two one-sided tests."""


@dataclass(frozen=True, slots=True)
class RatioFilter:
    """Recursive state of the ratio test; ``step`` needs only + and *, so it also takes arrays of replicates."""

    filtered: float
    previous: float
    nu2: float = 0.0
    delta2: float = 0.0

    @property
    def ratio(self) -> float | None:
        """About 1 for steady white noise; ``None`` when the signal did not move."""
        return (2.0 - LAMBDA_1) * self.nu2 / self.delta2 if self.delta2 > 0 else None


LAMBDA_1, LAMBDA_2, LAMBDA_3 = 0.2, 0.1, 0.1
"""Filter factors that the authors recommend by default."""


def ratio_start(value: float) -> RatioFilter:
    """The filter at its first sample."""
    return RatioFilter(value, value)


def ratio_step(
    filter_: RatioFilter, value: float, lambdas: tuple[float, float, float] = (LAMBDA_1, LAMBDA_2, LAMBDA_3)
) -> RatioFilter:
    """Take one sample. The order matters: ``nu2`` uses the filtered value from before this sample."""
    l1, l2, l3 = lambdas
    return RatioFilter(
        filtered=l1 * value + (1 - l1) * filter_.filtered,
        previous=value,
        nu2=l2 * (value - filter_.filtered) ** 2 + (1 - l2) * filter_.nu2,
        delta2=l3 * (value - filter_.previous) ** 2 + (1 - l3) * filter_.delta2,
    )


def ratio_over(values: tuple[float, ...]) -> float | None:
    """The ratio after these values; ``None`` when they do not move.

    Of few values the start counts, so the filter begins at the mean of the first four, and ``ratio_limits`` are higher.
    """
    first = values[:4]
    state = RatioFilter(sum(first) / len(first), values[0])
    for value in values[1:]:
        state = ratio_step(state, value)
    return state.ratio


def ratio_limits(count: int) -> tuple[float, float]:
    """What white noise exceeds with a probability of 5 % and of 1 % after so many values."""
    row = next((row for row in SHORT_LIMITS if count < row[0]), (0, RATIO_LIMIT, REJECT_LIMIT))
    return row[1], row[2]


@dataclass(frozen=True, slots=True)
class Trend:
    """Least-squares line through a window: ``slope`` and its standard error [unit/s], mean, number of values, and the
    middle of the window [s]."""

    slope: float
    error: float
    mean: float
    count: int
    middle_s: float = 0.0

    def off(self, t_s: float, value: float) -> float:
        """How far a value lies above the line."""
        return value - self.mean - self.slope * (t_s - self.middle_s)

    @property
    def significant(self) -> bool:
        """True when a two-sided t-test at 5 % rejects "no trend" (Kelly & Hedengren 2013)."""
        return self.count > 2 and abs(self.slope) > t_quantile(0.975, self.count - 2) * self.error

    def change_below(self, tolerance: float, horizon_s: float) -> bool:
        """True when the change over ``horizon_s`` is shown to be below ``tolerance``, up and down."""
        if self.count < 3:
            return False
        reach = abs(self.slope) + t_quantile(CONFIDENCE, self.count - 2) * self.error
        return reach * horizon_s < tolerance


def trend(window: tuple[tuple[float, float], ...]) -> Trend:
    """The line through (seconds, value) pairs; of fewer than three the error is infinite."""
    n = len(window)
    if n < 3:
        return Trend(0.0, math.inf, sum(v for _, v in window) / n if n else math.nan, n)
    mean_t, mean = sum(t for t, _ in window) / n, sum(v for _, v in window) / n
    spread = sum((t - mean_t) ** 2 for t, _ in window)
    slope = sum((t - mean_t) * (v - mean) for t, v in window) / spread
    residual = sum((v - mean - slope * (t - mean_t)) ** 2 for t, v in window)
    return Trend(slope, math.sqrt(residual / (n - 2) / spread), mean, n, mean_t)


@dataclass(frozen=True, slots=True)
class SettleRule:
    """``tolerance`` [tag unit] over ``horizon_s``; ``window`` blocks of ``block`` samples; ``persistence`` in a row."""

    tolerance: float
    horizon_s: float
    window: int
    persistence: int
    block: int = 1


@dataclass(frozen=True, slots=True)
class Settler:
    """Streaming state. ``verdict`` says why it is not steady: "few", "frozen", "moving", "unproven", or "steady".

    ``raw`` holds the last samples. The ratio is taken over them alone: the plain recursion would remember a step that
    is large against the noise for dozens of samples.
    """

    raw: tuple[float, ...] = ()
    started_ns: int = 0
    pending: tuple[tuple[float, float], ...] = ()
    blocks: tuple[tuple[float, float], ...] = ()
    run: int = 0
    count: int = 0
    verdict: str = "few"

    @property
    def trend(self) -> Trend:
        """The line through the present window of blocks."""
        return trend(self.blocks)


def settle_step(settler: Settler, rule: SettleRule, t_ns: int, value: float) -> Settler:
    """Take one good sample; judge whenever a block is complete."""
    started_ns = settler.started_ns or t_ns
    pending = (*settler.pending, ((t_ns - started_ns) / 1e9, value))
    settler = replace(
        settler,
        raw=(*settler.raw, value)[-min(max(rule.window * rule.block, 3), RATIO_MEMORY) :],
        started_ns=started_ns,
        pending=pending,
        count=settler.count + 1,
    )
    return settler if len(pending) < rule.block else _judge(_closed(settler, rule), rule)


def is_steady(settler: Settler, rule: SettleRule) -> bool:
    """True after ``persistence`` accepted blocks in a row."""
    return settler.run >= rule.persistence


def _closed(settler: Settler, rule: SettleRule) -> Settler:
    n = len(settler.pending)
    block = (sum(t for t, _ in settler.pending) / n, sum(v for _, v in settler.pending) / n)
    return replace(settler, pending=(), blocks=(*settler.blocks, block)[-rule.window :])


def _judge(settler: Settler, rule: SettleRule) -> Settler:
    verdict = _verdict(settler, rule)
    return replace(settler, verdict=verdict, run=settler.run + 1 if verdict == "steady" else 0)


def _verdict(settler: Settler, rule: SettleRule) -> str:
    if len(settler.blocks) < rule.window:
        return "few"
    newest = settler.raw[-max(rule.window // 2, 3) :]
    if min(newest) == max(newest):
        return "frozen"
    ratio = ratio_over(settler.raw)
    accept, reject = ratio_limits(len(settler.raw))
    line = settler.trend
    straight = max(abs(line.off(t, value)) for t, value in settler.blocks) < SMALL * rule.tolerance
    if ratio is None or (ratio > (reject if settler.run else accept) and not straight):
        return "moving"
    ahead_s = rule.horizon_s + settler.blocks[-1][0] - line.middle_s  # what is told is the mean of the window
    return "steady" if line.change_below(rule.tolerance, ahead_s) else "unproven"
