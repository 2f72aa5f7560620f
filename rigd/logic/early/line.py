"""A sum of known terms with unknown weights, learned from few measurements, with what is not known yet.

``drop = offset + lines * cold + bed * warm``: the offset is what a back-pressure regulator keeps (or two sensors
disagree by), ``cold`` and ``warm`` are what the declared geometry says of tubes and beds at their temperatures, and the
weights correct it. Least squares with a prior, one measurement at a time (the Kalman update of constants: R. E. Kalman,
J. Basic Eng. 82 (1960) 35-45).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

Terms = tuple[float, float, float]
"""1, cold and warm [bar]."""

SMALLEST_WEIGHT = 0.02
"""No path resists less than this part of what its geometry says."""


@dataclass(frozen=True, slots=True)
class LearnedSum:
    """Weights (offset [bar], cold, warm) and their covariance."""

    weights: Terms
    covariance: tuple[Terms, Terms, Terms]

    @property
    def offset(self) -> float:
        """What stands without any flow [bar]."""
        return self.weights[0]

    def flowing(self, cold: float, warm: float) -> float:
        """The part of the drop that goes with the flow [bar]."""
        return self.weights[1] * cold + self.weights[2] * warm

    def spread(self, cold: float, warm: float) -> float:
        """One standard deviation of the whole drop [bar]."""
        terms = (1.0, cold, warm)
        return math.sqrt(max(_dot(terms, self._towards(terms)), 0.0))

    def learned(self, cold: float, warm: float, drop: float, spread: float) -> LearnedSum:
        """After one measurement with the given standard deviation. The weights of the geometry stay positive."""
        terms = (1.0, cold, warm)
        towards = self._towards(terms)
        total = _dot(terms, towards) + spread * spread
        error = drop - self.offset - self.flowing(cold, warm)
        offset, *scales = (weight + t / total * error for weight, t in zip(self.weights, towards, strict=True))
        rows = [
            [self.covariance[i][j] - towards[i] * towards[j] / total for j in range(3)] for i in range(3)
        ]  # fmt: skip
        first, second, third = ((row[0], row[1], row[2]) for row in rows)
        lines, bed = (max(scale, SMALLEST_WEIGHT) for scale in scales)
        return LearnedSum((offset, lines, bed), (first, second, third))

    def _towards(self, terms: Terms) -> Terms:
        first, second, third = (_dot(row, terms) for row in self.covariance)
        return first, second, third


def prior(offset: float, offset_spread: float, cold_spread: float, warm_spread: float) -> LearnedSum:
    """The geometry as declared (weights 1), with so much doubt about each weight."""
    zero = 0.0
    return LearnedSum(
        (offset, 1.0, 1.0),
        ((offset_spread**2, zero, zero), (zero, cold_spread**2, zero), (zero, zero, warm_spread**2)),
    )


def _dot(a: Terms, b: Terms) -> float:
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
