"""Uncertainty of a measured value from its parts, by the GUM (JCGM 100:2008).

Parts are independent. Combined standard uncertainty: root of the sum of squares (5.1.2). Effective degrees of freedom:
Welch-Satterthwaite (G.4.1), rounded down (G.6.4). Coverage factor: Student's t (G.3).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

CONFIDENCE = 0.95


@dataclass(frozen=True, slots=True)
class Part:
    """One contribution: its standard uncertainty in the unit of the result; ``freedom`` infinite if well known."""

    name: str
    standard: float
    freedom: float = math.inf


@dataclass(frozen=True, slots=True)
class Combined:
    """Standard and expanded uncertainty in the unit of the result; ``expanded = coverage * standard``."""

    standard: float
    freedom: float
    coverage: float
    expanded: float


def rectangular(half_width: float) -> float:
    """Standard uncertainty of something that lies anywhere within plus or minus ``half_width`` (4.3.7)."""
    return half_width / math.sqrt(3.0)


def of_mean(values: Sequence[float], name: str = "repeats") -> Part:
    """Type A: that of the mean of independent repeats (4.2.3); ``ValueError`` for fewer than two."""
    count = len(values)
    if count < 2:
        raise ValueError("repeats tell their scatter from two on")
    mean = sum(values) / count
    variance = sum((value - mean) ** 2 for value in values) / (count - 1)
    return Part(name, math.sqrt(variance / count), count - 1)


def combine(parts: Sequence[Part], confidence: float = CONFIDENCE) -> Combined:
    """Put the parts together; ``confidence`` is the level of the expanded uncertainty."""
    from scipy.special import ndtri, stdtrit  # quantiles; the statistics package costs seconds to import

    standard = math.sqrt(sum(part.standard**2 for part in parts))
    spread = sum(part.standard**4 / part.freedom for part in parts if math.isfinite(part.freedom))
    freedom = standard**4 / spread if spread > 0 else math.inf
    level = 0.5 + confidence / 2
    whole = max(1.0, math.floor(freedom)) if math.isfinite(freedom) else math.inf
    coverage = float(stdtrit(whole, level)) if math.isfinite(whole) else float(ndtri(level))
    return Combined(standard, freedom, coverage, coverage * standard)
