"""How long it takes a growing quantity to reach a limit, from its own past.

The growth is taken as x' = s with s itself growing or not: x(t) = x0 + s (exp(k t) - 1)/k, a straight line for k = 0,
an exponential otherwise. Filters that clog at constant flow do either (cake: straight; pores that narrow: ever
steeper; J. Hermia, Trans. Inst. Chem. Eng. 60 (1982) 183-187, from memory), and k is read from two halves of the past.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

History = tuple[tuple[int, float], ...]
LONGEST = 48
FEWEST = 8
RECENT = 0.3
"""The past that counts began when the excess over 1 was this part of what it is now."""
GROWN = 0.7
"""Without a beginning below this part of it, nothing has been seen to grow: a step, or noise."""
_STRAIGHT = 1e-6


def remembered(history: History, t_ns: int, value: float) -> History:
    """The history with one more point; when it is full, every second point of its older half goes."""
    if len(history) >= LONGEST:
        half = LONGEST // 2
        history = history[:half:2] + history[half:]
    return (*history, (t_ns, value))


def time_left_s(history: History, limit: float, now_ns: int) -> float | None:
    """Seconds until ``limit`` at the present growth; ``None`` when it does not grow or too little is known.

    The values are ratios to what is healthy (1).
    """
    recent = _recent(history)
    if len(recent) < FEWEST:
        return None
    middle = len(recent) // 2
    older, newer = _slope(recent[:middle]), _slope(recent[middle:])
    whole = _slope(recent)
    if whole is None or whole[1] <= 0.0:
        return None
    value = recent[-1][1]
    if limit <= value:
        return 0.0
    if older is None or newer is None or older[1] <= 0.0 or newer[1] <= older[1]:
        return (limit - value) / whole[1] if newer is None or newer[1] <= 0.0 else (limit - value) / newer[1]
    k = math.log(newer[1] / older[1]) / (newer[0] - older[0])
    slope_now = newer[1] * math.exp(k * (now_ns / 1e9 - newer[0]))
    if k * (limit - value) < _STRAIGHT * slope_now:
        return (limit - value) / slope_now
    return math.log1p(k * (limit - value) / slope_now) / k


def _recent(history: History) -> History:
    """The last stretch of the history in which the excess grew to what it is; none when it was there at once."""
    if not history:
        return ()
    excess = history[-1][1] - 1.0
    start = len(history)
    while start > 0 and history[start - 1][1] - 1.0 >= RECENT * excess:
        start -= 1
    recent = history[start:]
    return recent if recent and recent[0][1] - 1.0 <= GROWN * excess else ()


def _slope(points: Sequence[tuple[int, float]]) -> tuple[float, float] | None:
    """Mean time [s] and least-squares slope [1/s]; ``None`` for fewer than two instants."""
    n = len(points)
    if n < 2:
        return None
    mean_t = sum(t for t, _ in points) / n / 1e9
    spread = sum((t / 1e9 - mean_t) ** 2 for t, _ in points)
    if spread <= 0.0:
        return None
    mean_v = sum(value for _, value in points) / n
    return mean_t, sum((t / 1e9 - mean_t) * (value - mean_v) for t, value in points) / spread
