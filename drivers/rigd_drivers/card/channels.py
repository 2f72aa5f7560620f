"""From what a device said to readings of channels: scale, unit, map, standard signals, faults, counters."""

from __future__ import annotations

import math
from collections.abc import Mapping

from rigd.model.errors import DeviceProtocolError
from rigd.model.samples import Reading
from rigd.model.units import UNITS
from rigd_drivers.card import signals
from rigd_drivers.card.expressions import Value, number, parse
from rigd_drivers.card.model import Card, Channel

LOST = -2.0
"""Position of a valve without feedback before its first order."""


class Channels:
    """The channels of one card and what they remember: totals, counters, last orders."""

    def __init__(self, card: Card) -> None:
        self._card = card
        self.ordered: dict[str, float] = {}
        self._rates: dict[str, tuple[float, float]] = {}
        self._counts: dict[str, tuple[float, float]] = {}

    def forget(self) -> None:
        """A device that was away: totals and counters begin anew, its last order is not known."""
        self._rates.clear()
        self._counts.clear()
        self.ordered.clear()

    def needs(self, names: list[str]) -> frozenset[str]:
        """Readings that these channels are made of."""
        found: set[str] = set()
        for name in names:
            channel = self._card.channels[name]
            for formula in (channel.read, channel.fault, channel.cold_junction):
                found |= parse(formula).names if formula else set()
            found |= {f"channel.{channel.integral_of}"} if channel.integral_of else set()
        others = [name.removeprefix("channel.") for name in found if name.startswith("channel.")]
        plain = frozenset(name for name in found if not name.startswith("channel."))
        return plain | self.needs(others) if others else plain

    def readings(self, names: list[str], known: Mapping[str, Value], now_s: float) -> dict[str, Reading]:
        """Readings by channel, from what was read. What makes no sense is a fault of a sensor, else raised."""
        wanted = self._with_earlier(names)
        values, found = dict(known), {}
        faults = self._faults(known)
        for name in wanted:
            try:
                reading = self._reading(name, values, now_s)
            except (DeviceProtocolError, KeyError) as error:
                if self._card.family != "sensor":
                    raise
                reading = Reading(name, math.nan, fault=str(error))
            if name in faults and not reading.fault:
                reading = Reading(name, reading.value, fault=faults[name])
            found[name] = reading
            values[f"channel.{name}"] = reading.value
        return found

    def _with_earlier(self, names: list[str]) -> list[str]:
        """Channels in the card's order, with those that others are made of."""
        wanted = set(names)
        for name, channel in reversed(self._card.channels.items()):
            if name in wanted:
                parts = set().union(*(parse(one).names for one in (channel.read, channel.fault) if one))
                wanted |= {part.removeprefix("channel.") for part in parts if part.startswith("channel.")}
                wanted |= {channel.integral_of} - {""}
        return [name for name in self._card.channels if name in wanted]

    def _faults(self, known: Mapping[str, Value]) -> dict[str, str]:
        """Channel -> what the device calls wrong."""
        told: dict[str, str] = {}
        for fault in self._card.faults:
            if parse(fault.when).names <= known.keys() and parse(fault.when).true(known):
                told |= dict.fromkeys(fault.channels or self._card.channels, fault.means)
        return told

    def _reading(self, name: str, known: Mapping[str, Value], now_s: float) -> Reading:
        channel = self._card.channels[name]
        if channel.constant is not None:
            return Reading(name, channel.constant)
        if channel.last_order:
            before = channel.before if channel.before is not None else LOST if self._card.family == "valve" else 0.0
            return Reading(name, self.ordered.get(channel.last_order, before))
        if channel.integral_of:
            rate = number(known[f"channel.{channel.integral_of}"])
            return Reading(name, self._integral(name, rate, now_s) * channel.scale + channel.offset)
        value = parse(channel.read)(known)
        if (why := channel.bad.get(plain(value))) is not None:
            return Reading(name, math.nan, fault=why or plain(value))
        if channel.counts:
            value = self._counted(name, number(value), channel.wraps_at)
        reading = self._measured(name, channel, value, known)
        if channel.fault and parse(channel.fault).true(known) and not reading.fault:
            return Reading(name, reading.value, fault=f"the device says so: {channel.fault}")
        return reading

    def _measured(self, name: str, channel: Channel, value: Value, known: Mapping[str, Value]) -> Reading:
        if channel.map:
            key = plain(value)
            if key not in channel.map:
                raise DeviceProtocolError(f"{name}: {key!r} is not in the card's map {', '.join(channel.map)}")
            return Reading(name, channel.map[key])
        found = number(value) * channel.scale + channel.offset
        if not math.isfinite(found):
            return Reading(name, math.nan, fault="not a number")
        if channel.signal:
            return _signal(name, channel, found, known)
        return Reading(name, _house(channel, found))

    def _integral(self, name: str, rate_per_min: float, now_s: float) -> float:
        last_s, total = self._rates.get(name, (now_s, 0.0))
        total += max(rate_per_min, 0.0) * (now_s - last_s) / 60.0
        self._rates[name] = (now_s, total)
        return total

    def _counted(self, name: str, now: float, wraps_at: float) -> float:
        """A counter that only rises: one that fell has begun anew, or wrapped."""
        last, total = self._counts.get(name, (now, now))
        rise = now - last
        if rise < 0:
            rise = now - last + wraps_at if wraps_at else now
        self._counts[name] = (now, total + rise)
        return total + rise


def plain(value: Value) -> str:
    """A value as keys of ``map`` write it."""
    return value.strip() if isinstance(value, str) else f"{value:g}"


def _house(channel: Channel, number: float) -> float:
    return number * UNITS[channel.unit].factor + UNITS[channel.unit].offset if channel.unit else number


def _signal(name: str, channel: Channel, number_: float, known: Mapping[str, Value]) -> Reading:
    if channel.signal == "4-20mA":
        low, high = channel.span or (0.0, 1.0)
        health = signals.current_health(number_)
        value = _house(channel, signals.from_current(number_, low, high))
        return Reading(name, value, fault=f"{number_:.2f} mA: {health}" if health is signals.Health.FAILURE else "")
    if channel.signal == "pt100":
        value = signals.pt100_degC(number_)
    else:
        kind = channel.signal.removeprefix("thermocouple-")
        if channel.cold_junction:
            number_ += signals.thermocouple_mV(kind, number(parse(channel.cold_junction)(known)))
        value = signals.thermocouple_degC(kind, number_)
    return Reading(name, value, fault="" if math.isfinite(value) else f"{number_:g} is outside the probe's range")
