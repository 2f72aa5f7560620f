"""What a pump delivers, by weighing: volume from mass and density, and what is known of it.

``V = m (1 - rho_air / rho_weights) / (rho_liquid - rho_air)`` (ISO 8655-6, ISO 4787; without the term for the glass: a
pump has no temperature of reference, its factor belongs to the temperature at which it was found). The weights are the
conventional ones of 8000 kg/m3 (OIML D 28). Leaving the buoyancy of air out makes water look 0.1 % less than it is.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from rigd.analysis.uncertainty import Combined, Part, combine, of_mean, rectangular

WEIGHTS_G_ML = 8.0
REPEATS_LEAST = 3
"""Fewer say too little about scatter (ISO 8655-6 asks for ten; common practice, no source, for three)."""
FACTOR_RANGE = (0.8, 1.25)
"""A pump outside is broken, or something else was weighed than was thought (proposal; no source)."""


@dataclass(frozen=True, slots=True)
class Room:
    """The air at the balance."""

    temperature_degC: float = 22.0
    pressure_hPa: float = 1013.25
    humidity: float = 0.5

    @property
    def air_g_mL(self) -> float:
        """Density of air: OIML R 111-1:2004, formula E.3-1; within 2e-4 of the CIPM one from 600 to 1100 hPa, 20 to
        80 % relative humidity, 10 to 30 degC."""
        t, h = self.temperature_degC, 100.0 * self.humidity
        return (0.34848 * self.pressure_hPa - 0.009 * h * math.exp(0.061 * t)) / (273.15 + t) * 1e-3


@dataclass(frozen=True, slots=True)
class Weighing:
    """Masses [g] that were read for the same ordered volume [mL]; ``readability_g`` is the balance's last digit,
    ``balance_g`` its standard uncertainty by its own calibration; ``evaporated_g`` lost in one repeat.

    ``density_g_mL`` at the liquid's temperature with its standard uncertainty, and its change per kelvin.
    """

    ordered_mL: float
    masses_g: tuple[float, ...]
    density_g_mL: float
    density_standard_g_mL: float
    density_per_K: float = 0.0
    temperature_standard_K: float = 0.5
    readability_g: float = 1e-4
    balance_g: float = 0.0
    evaporated_g: float = 0.0


@dataclass(frozen=True, slots=True)
class Delivered:
    """``factor``: what comes out over what was ordered, with its uncertainty and the parts of that; each repeat's
    volume [mL]."""

    factor: float
    uncertainty: Combined
    parts: tuple[Part, ...]
    volumes_mL: tuple[float, ...]


def per_gram_mL(density_g_mL: float, room: Room) -> float:
    """Volume of a gram as read on a balance in air (the Z factor of ISO 8655-6)."""
    return (1.0 - room.air_g_mL / WEIGHTS_G_ML) / (density_g_mL - room.air_g_mL)


def water_g_mL(temperature_degC: float) -> float:
    """Density of pure water without air, 0 to 40 degC: M. Tanaka et al., Metrologia 38 (2001) 301, equation 1."""
    t = temperature_degC
    return 0.999974950 * (1 - (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881)))


def at_temperature(three: tuple[float, float, float], temperature_degC: float) -> tuple[float, float]:
    """(value, change per kelvin) at a temperature from values at 0, 25 and 60 degC, by the parabola through them."""
    (y0, y1, y2), (x0, x1, x2), t = three, (0.0, 25.0, 60.0), temperature_degC
    first, second = (y1 - y0) / (x1 - x0), (y2 - y1) / (x2 - x1)
    bend = (second - first) / (x2 - x0)
    return y0 + first * (t - x0) + bend * (t - x0) * (t - x1), first + bend * (2 * t - x0 - x1)


def delivered(weighing: Weighing, room: Room = Room()) -> Delivered:
    """The factor of a pump. ``ValueError`` for too few repeats, or a factor that no pump has."""
    if len(weighing.masses_g) < REPEATS_LEAST:
        raise ValueError(
            f"{len(weighing.masses_g)} weighings are too few; {REPEATS_LEAST} are the least, ten are better"
        )
    per_gram = per_gram_mL(weighing.density_g_mL, room)
    volumes = tuple((mass + weighing.evaporated_g) * per_gram for mass in weighing.masses_g)
    factors = [volume / weighing.ordered_mL for volume in volumes]
    factor = sum(factors) / len(factors)
    if not FACTOR_RANGE[0] <= factor <= FACTOR_RANGE[1]:
        raise ValueError(
            f"{factor:.3f} times what was ordered would have come out: look at units, liquid and pump; nothing from "
            f"{FACTOR_RANGE[0]:g} to {FACTOR_RANGE[1]:g} is a matter of calibration"
        )
    parts = (of_mean(factors), *_known(weighing, factor))
    return Delivered(factor, combine(parts), parts, volumes)


def _known(weighing: Weighing, factor: float) -> Sequence[Part]:
    """Type B: reading before and after, the balance itself, density, temperature, half of what evaporated."""
    mass = factor * weighing.ordered_mL * weighing.density_g_mL
    reading = math.sqrt(2.0) * rectangular(weighing.readability_g / 2)
    heat = weighing.density_per_K * weighing.temperature_standard_K / weighing.density_g_mL
    return (
        Part("reading the balance", factor * reading / mass),
        Part("the balance", factor * weighing.balance_g / mass),
        Part("density", factor * weighing.density_standard_g_mL / weighing.density_g_mL),
        Part("temperature of the liquid", factor * abs(heat)),
        Part("evaporation", factor * rectangular(weighing.evaporated_g / 2) / mass),
    )
