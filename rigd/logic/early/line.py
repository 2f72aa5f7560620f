"""A straight line learned from few measurements, with what is not known yet: pressure drop against flow.

``drop = offset + scale * predicted``: the offset is what a back-pressure regulator keeps (or two sensors disagree by),
the scale corrects the geometry as declared. Least squares with a prior, one measurement at a time (the Kalman update
of two constants: R. E. Kalman, J. Basic Eng. 82 (1960) 35-45).
"""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class LearnedLine:
    """Offset [bar] and scale with their variances and covariance."""

    offset: float
    scale: float
    var_offset: float
    var_scale: float
    covariance: float = 0.0

    def at(self, predicted: float) -> float:
        """The drop that belongs to a predicted one [bar]."""
        return self.offset + self.scale * predicted

    def spread(self, predicted: float) -> float:
        """One standard deviation of that [bar]."""
        variance = self.var_offset + predicted * (2.0 * self.covariance + predicted * self.var_scale)
        return math.sqrt(max(variance, 0.0))

    def learned(self, predicted: float, drop: float, spread: float) -> LearnedLine:
        """After one measurement with the given standard deviation. The scale stays positive."""
        to_offset = self.var_offset + predicted * self.covariance
        to_scale = self.covariance + predicted * self.var_scale
        total = to_offset + predicted * to_scale + spread * spread
        gain_offset, gain_scale = to_offset / total, to_scale / total
        error = drop - self.at(predicted)
        return LearnedLine(
            self.offset + gain_offset * error,
            max(self.scale + gain_scale * error, SMALLEST_SCALE),
            self.var_offset - gain_offset * to_offset,
            self.var_scale - gain_scale * to_scale,
            self.covariance - gain_offset * to_scale,
        )


SMALLEST_SCALE = 0.02
"""No path resists less than this part of what its geometry says."""
