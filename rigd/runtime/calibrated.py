"""Calibrations at work: everything above the driver speaks true values, everything below the device's own.

A pump that gives ``factor`` times what it is told is told ``1/factor`` of the wish, and all that it counts (flow,
levels, delivered) is taken times the factor; its syringe then holds ``factor`` times the declared stroke, and its rates
reach so much further, so the rig that the core sees is changed alike. A sensor shows ``(reading - zero) * gain``. The
guard's last wills stop and move; they carry no volumes and are left as they are.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

from rigd.adapters.rig_records import read_records
from rigd.config.calibrating import corrections, facts, from_facts, in_force
from rigd.model.calibration import Corrections
from rigd.model.devices import DeviceIdentity, LastWill, LinkSpec
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Action, Order
from rigd.model.rig import Pump, RigDefinition, Tag
from rigd.model.samples import Reading, Spectrum
from rigd.ports.driver import Driver
from rigd.ports.link import Line

COUNTED = ("flow", "level", "standby", "delivered")
"""Channels of a pump that count volume."""
TOLD = (Action.DELIVER, Action.FILL)


@dataclass(frozen=True, slots=True)
class SensorLine:
    """What a sensor of this span truly sees: ``(shown - zero) * gain``.

    What it shows beyond its span is left as it is, so that a correction never makes a broken loop look sound (the inner
    limits of NAMUR NE 43, as the core judges them: -1.25 % and 103.125 % of span).
    """

    zero: float
    gain: float
    low: float
    high: float

    def true(self, shown: float) -> float:
        """The corrected value, or ``shown`` itself beyond the span."""
        span = self.high - self.low
        if self.low - 0.0125 * span <= shown <= self.high + 0.03125 * span:
            return (shown - self.zero) * self.gain
        return shown


class CalibratedDriver:
    """Implements ``rigd.ports.driver.Driver`` around another one."""

    def __init__(self, driver: Driver, factor: float, channels: Mapping[str, SensorLine]) -> None:
        self._driver, self._factor, self._channels = driver, factor, channels

    async def identify(self, line: Line) -> DeviceIdentity:
        """As the driver's."""
        return await self._driver.identify(line)

    async def prepare(self, line: Line) -> bool:
        """As the driver's."""
        return await self._driver.prepare(line)

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """True values."""
        return [self._true(reading) for reading in await self._driver.poll(line, channels)]

    async def execute(self, line: Line, order: Order) -> None:
        """The order in the device's own measure."""
        if order.action in TOLD:
            order = replace(order, value=order.value / self._factor)
        await self._driver.execute(line, order)

    def last_will(self, link: LinkSpec) -> LastWill:
        """As the driver's."""
        return self._driver.last_will(link)

    async def spectrum(self, line: Line) -> Spectrum:
        """As the driver's, if it reads spectra."""
        read = getattr(self._driver, "spectrum", None)
        if read is None:
            raise LocalProtocolError("this device reads no spectra")
        found: Spectrum = await read(line)
        return found

    def _true(self, reading: Reading) -> Reading:
        if (line := self._channels.get(reading.channel)) is not None:
            return replace(reading, value=line.true(reading.value))
        if reading.channel in COUNTED:
            return replace(reading, value=reading.value * self._factor)
        return reading


def calibrations_of(rig_path: Path, rig: RigDefinition) -> list[dict[str, object]]:
    """Those in force for a run that starts now, as facts. ``JournalError`` when the record was tampered with."""
    return facts(in_force(rig, read_records(rig_path)), datetime.now(UTC))


def corrections_of(told: str | Sequence[Mapping[str, object]]) -> Corrections:
    """What the facts (or their JSON) mean for a run; "" is none."""
    found = json.loads(told) if isinstance(told, str) and told else told or []
    return corrections(from_facts(found))


def calibrated_drivers(drivers: Mapping[str, Driver], rig: RigDefinition, found: Corrections) -> dict[str, Driver]:
    """The drivers, those of calibrated parts wrapped."""
    factors = {pump.device: found.pumps[pump.id] for pump in rig.pumps if pump.id in found.pumps}
    sensors: dict[str, dict[str, SensorLine]] = {}
    for tag in rig.tags:
        if tag.id in found.sensors:
            sensors.setdefault(tag.device, {})[tag.channel] = SensorLine(*found.sensors[tag.id], tag.low, tag.high)
    wrapped = dict(drivers)
    for device in factors.keys() | sensors.keys():
        wrapped[device] = CalibratedDriver(drivers[device], factors.get(device, 1.0), sensors.get(device, {}))
    return wrapped


def calibrated_rig(rig: RigDefinition, found: Corrections) -> RigDefinition:
    """The rig as it truly is: strokes, dead volumes and rates of calibrated pumps, and the spans of their counts."""
    if not found.pumps:
        return rig
    factors = {pump.device: found.pumps[pump.id] for pump in rig.pumps if pump.id in found.pumps}
    return replace(
        rig,
        pumps=tuple(_true_pump(pump, found.pumps.get(pump.id, 1.0)) for pump in rig.pumps),
        tags=tuple(_true_span(tag, factors.get(tag.device, 1.0)) for tag in rig.tags),
    )


def _true_pump(pump: Pump, factor: float) -> Pump:
    return replace(
        pump,
        stroke_mL=pump.stroke_mL * factor,
        dead_mL=pump.dead_mL * factor,
        rate_min_mL_min=pump.rate_min_mL_min * factor,
        rate_max_mL_min=pump.rate_max_mL_min * factor,
        refill_rate_mL_min=pump.refill_rate_mL_min * factor,
    )


def _true_span(tag: Tag, factor: float) -> Tag:
    return replace(tag, low=tag.low * factor, high=tag.high * factor) if tag.channel in COUNTED else tag
