"""What the sensors show: place, lag, noise, converter code and its faults.

A converter spans 4..20 mA: code 10000 at the low end and 50000 at the high end. Below 3.6 mA (code 9000) and above
21 mA (52500) it
reports LOW and HIGH (failure levels of NAMUR NE 43). The value shown is the one that the code stands for.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from rigd.model.rig import RigDefinition, Tag
from rigd.model.samples import Reading
from rigd_sim.plant.levers import SensorLever

CODE_LOW, CODE_HIGH = 10_000, 50_000
CODE_UNDER, CODE_OVER = 9_000, 52_500
WANDER_S = 600.0
"""Correlation time of a sensor's slow drift (common practice, no source)."""
HEALTHY = SensorLever()
Truth = Callable[[], float]


class Noise:
    """White noise from the plant's seed, drawn in blocks because one draw at a time is slow."""

    BLOCK = 4096

    def __init__(self, seed: int) -> None:
        self._random = np.random.default_rng(seed)
        self._block: list[float] = []

    def normal(self) -> float:
        """One standard normal number."""
        if not self._block:
            self._block = self._random.standard_normal(self.BLOCK).tolist()
        return self._block.pop()

    def uniform(self) -> float:
        """One number in 0..1."""
        return float(self._random.random())


@dataclass(slots=True)
class Sensor:
    """One measured tag. ``truth`` gives the value at its place now; ``slot`` >= 0: lagged by the pressure solver."""

    tag: Tag
    truth: Truth
    slot: int = -1
    shown: float = math.nan
    code: int = CODE_LOW
    frozen_code: int | None = None
    wandered: float = 0.0

    def advance(self, dt: float) -> None:
        """First-order lag towards the truth (not for a slot of the pressure solver, which lags by itself)."""
        now = self.truth()
        if math.isnan(self.shown) or self.tag.lag_s <= 0.0:
            self.shown = now
        else:
            self.shown = now + (self.shown - now) * math.exp(-dt / self.tag.lag_s)

    def wander(self, dt: float, noise: Noise) -> None:
        """Slow drift to and fro with the tag's ``wander``: Gaussian, correlated over ``WANDER_S``, exact at any step.

        G. E. Uhlenbeck, L. S. Ornstein, Phys. Rev. 36 (1930) 823.
        """
        keep = math.exp(-dt / WANDER_S)
        self.wandered = keep * self.wandered + self.tag.wander * math.sqrt(1.0 - keep * keep) * noise.normal()

    def read(self, value: float, noise: Noise, lever: SensorLever, room: float) -> Reading:
        """Convert a lagged value to what the module reports."""
        if lever.is_open:
            return Reading(self.tag.channel, math.nan, 0, "OPEN")
        if lever.frozen and self.frozen_code is not None:
            return self._reading(self.frozen_code)
        if lever is not HEALTHY:
            value = spoil(value, lever, room, noise)
        value += self.wandered + self.tag.noise * lever.noise * noise.normal()
        if lever.beyond:
            value = self.tag.high + 10.0 * (self.tag.high - self.tag.low) * lever.beyond
        span = self.tag.high - self.tag.low
        code = round(CODE_LOW + (CODE_HIGH - CODE_LOW) * (value - self.tag.low) / span)
        self.frozen_code = min(max(code, 0), 65_535)
        return self._reading(self.frozen_code)

    def _reading(self, code: int) -> Reading:
        if code < CODE_UNDER or code > CODE_OVER:
            return Reading(self.tag.channel, math.nan, code, "LOW" if code < CODE_UNDER else "HIGH")
        share = (code - CODE_LOW) / (CODE_HIGH - CODE_LOW)
        return Reading(self.tag.channel, self.tag.low + share * (self.tag.high - self.tag.low), code)


def spoil(value: float, lever: SensorLever, room: float, noise: Noise) -> float:
    """Mirror, detachment, spikes, gain and offset of a faulty sensor."""
    if lever.mirrored:
        value = 2.0 * room - value
    value = value + (room - value) * lever.loose
    if lever.spikes and noise.uniform() < 0.2:
        value += lever.spikes * noise.normal()
    return value * lever.gain + lever.offset


class Instruments:
    """All sensors by device and channel."""

    def __init__(self, rig: RigDefinition, seed: int) -> None:
        self.noise = Noise(seed)
        self.by_device: dict[str, dict[str, Sensor]] = {}
        self.by_tag: dict[str, Sensor] = {}
        self._lagging: list[Sensor] = []
        self._wandering: list[Sensor] = []
        self._slow = Noise(seed + 1)
        self._rig = rig

    def add(self, sensor: Sensor) -> None:
        """Put a sensor on its device's channel."""
        self.by_device.setdefault(sensor.tag.device, {})[sensor.tag.channel] = sensor
        self.by_tag[sensor.tag.id] = sensor
        if sensor.slot < 0:
            self._lagging.append(sensor)
        if sensor.tag.wander > 0.0:
            self._wandering.append(sensor)

    def advance(self, dt: float) -> None:
        """Let all lags and drifts run."""
        for sensor in self._lagging:
            sensor.advance(dt)
        if dt > 0.0:
            for sensor in self._wandering:
                sensor.wander(dt, self._slow)
