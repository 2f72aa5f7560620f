"""Volume and dispersion of a segment from a tracer that went through it: moments of the response.

Mean and variance of the residence time distribution: O. Levenspiel, Chemical Reaction Engineering, 3rd ed., chapters 11
and 13. What goes in has a width of its own; where it was measured too, its moments are subtracted (they add in series).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

from rigd.analysis.residence import Spread, closed_variance

TAIL, LAST = 0.05, 10
"""A response that in its last tenth still is more than this share of its peak (pulse) or height (step) from its end was
cut off."""
DRIFT = 0.2
"""A baseline that moved by more than this share of the whole curve is none."""


def pulse(times_s: Sequence[float], signal: Sequence[float]) -> Spread:
    """Moments of the response to a pulse, baseline through both ends. ``ValueError`` for a curve that is none."""
    times, values = _ordered(times_s, signal)
    base = [values[0] + (values[-1] - values[0]) * (t - times[0]) / (times[-1] - times[0]) for t in times]
    height = [value - level for value, level in zip(values, base, strict=True)]
    if abs(min(height)) > abs(max(height)):
        height = [-one for one in height]
    peak = max(height)
    drift = abs(values[-1] - values[0])
    if peak <= 0 or height[-len(height) // LAST] > TAIL * peak or drift > DRIFT * (max(values) - min(values)):
        raise ValueError("the curve is not flat at its end: record it until it is")
    area = _integral(times, height)
    mean = _integral(times, [t * h for t, h in zip(times, height, strict=True)]) / area
    variance = _integral(times, [(t - mean) ** 2 * h for t, h in zip(times, height, strict=True)]) / area
    return Spread(mean, max(variance, 0.0))


def step(times_s: Sequence[float], signal: Sequence[float]) -> Spread:
    """Moments of the response to a step, from the first level to the last."""
    times, values = _ordered(times_s, signal)
    rise = values[-1] - values[0]
    if rise == 0 or abs(values[-len(values) // LAST] - values[-1]) > TAIL * abs(rise):
        raise ValueError("the curve is not flat at its end: record it from the step until it is")
    left = [1.0 - (value - values[0]) / rise for value in values]  # 1 - F
    start = times[0]
    mean = _integral(times, left)
    second = 2 * _integral(times, [(t - start) * one for t, one in zip(times, left, strict=True)])
    return Spread(start + mean, max(second - mean**2, 0.0))


def without(whole: Spread, inlet: Spread) -> Spread:
    """The segment alone; ``ValueError`` when what went in came later or was wider than what came out."""
    found = Spread(whole.mean_s - inlet.mean_s, whole.variance_s2 - inlet.variance_s2)
    if found.mean_s <= 0 or found.variance_s2 < 0:
        raise ValueError("the inlet curve is later or wider than the outlet curve: are they exchanged?")
    return found


def peclet_of(spread: Spread) -> float:
    """Vessel Peclet number, closed-closed, with this spread; infinite for a plug, ``ValueError`` beyond one tank."""
    wanted = spread.variance_s2 / spread.mean_s**2
    if wanted <= 0:
        return math.inf
    if wanted >= 1:
        raise ValueError("the response is wider than that of one stirred tank: dead zones or a bypass")
    low, high = 1e-6, 4.0 / wanted
    for _ in range(200):
        middle = math.sqrt(low * high)
        low, high = (middle, high) if closed_variance(middle) > wanted else (low, middle)
    return low


def _ordered(times: Sequence[float], values: Sequence[float]) -> tuple[list[float], list[float]]:
    if len(times) != len(values) or len(times) < 10:
        raise ValueError(f"{len(times)} times and {len(values)} values: at least ten of each are needed")
    if any(b <= a for a, b in pairwise(times)) or not all(map(math.isfinite, (*times, *values))):
        raise ValueError("times must rise, and all must be numbers")
    return list(times), list(values)


def _integral(x: Sequence[float], y: Sequence[float]) -> float:
    return sum((b - a) * (p + q) / 2 for a, b, p, q in zip(x, x[1:], y, y[1:], strict=False))
