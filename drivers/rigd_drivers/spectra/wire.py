"""A spectrum as rigd wants it, from two columns of numbers. Pure. Wavenumbers [1/cm], absorbance (decadic) [AU]."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

EVEN = 0.01
"""Largest departure from an even grid, as a share of the step: what rounding of printed wavenumbers makes."""
POINTS_LEAST, POINTS_MOST = 3, 100_000
ABSORBANCE, TRANSMITTANCE, PERCENT = "absorbance", "transmittance", "percent transmittance"


@dataclass(frozen=True, slots=True)
class Curve:
    """An even grid, rising, and the absorbance on it."""

    start_per_cm: float
    step_per_cm: float
    absorbance: tuple[float, ...]

    def within(self, low_per_cm: float, high_per_cm: float) -> Curve:
        """The part between two wavenumbers; ``ValueError`` when fewer than ``POINTS_LEAST`` are left."""
        first = max(0, math.ceil((low_per_cm - self.start_per_cm) / self.step_per_cm - 1e-6))
        last = min(len(self.absorbance) - 1, math.floor((high_per_cm - self.start_per_cm) / self.step_per_cm + 1e-6))
        if last - first + 1 < POINTS_LEAST:
            raise ValueError(f"it has {max(last - first + 1, 0)} points from {low_per_cm:g} to {high_per_cm:g} 1/cm")
        start = self.start_per_cm + first * self.step_per_cm
        return Curve(start, self.step_per_cm, self.absorbance[first : last + 1])


def curve(wavenumbers: Sequence[float], ordinates: Sequence[float], unit: str) -> Curve:
    """The curve through points that rise or fall evenly; ``ValueError`` says why it is none."""
    count = len(wavenumbers)
    if count != len(ordinates) or not POINTS_LEAST <= count <= POINTS_MOST:
        raise ValueError(f"{count} wavenumbers and {len(ordinates)} ordinates are no spectrum")
    if not all(map(math.isfinite, (*wavenumbers, *ordinates))):
        raise ValueError("it holds something that is no number")
    step = (wavenumbers[-1] - wavenumbers[0]) / (count - 1)
    if step == 0 or any(abs(w - wavenumbers[0] - i * step) > EVEN * abs(step) for i, w in enumerate(wavenumbers)):
        raise ValueError("its wavenumbers are not evenly spaced; let the instrument's program write an even grid")
    values = absorbance(ordinates, unit)
    if step < 0:
        return Curve(wavenumbers[-1], -step, values[::-1])
    return Curve(wavenumbers[0], step, values)


def absorbance(ordinates: Sequence[float], unit: str) -> tuple[float, ...]:
    """``-log10`` of a transmittance; absorbance as it is. ``ValueError`` for a transmittance of nothing."""
    if unit == ABSORBANCE:
        return tuple(ordinates)
    whole = 100.0 if unit == PERCENT else 1.0
    if min(ordinates) <= 0:
        raise ValueError("a transmittance of zero or less has no absorbance")
    return tuple(-math.log10(value / whole) for value in ordinates)
