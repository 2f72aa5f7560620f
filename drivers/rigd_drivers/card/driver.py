"""One driver for every protocol card."""

from __future__ import annotations

import asyncio
import math
from collections.abc import Mapping, Sequence
from pathlib import Path

from pydantic import Field

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, DeviceRefused, LinkTimeout, LocalProtocolError, WrongDevice
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading
from rigd.model.units import UNITS
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.card import signals, text
from rigd_drivers.card.model import Channel, load_card
from rigd_drivers.card.talk import Talk
from rigd_drivers.options import Options, read_options, refuse, schema_of


class CardOptions(Options):
    """``card``: the file, beside the rig file."""

    card: str = Field(description="a protocol card, e.g. 'my-pump.toml'; a relative path starts at the rig file")


class NotTheDevice(WrongDevice, DeviceRefused):
    """Another device answers than the card describes."""


class Account:
    """The fillings of a pump that draws from its bottle all the time, kept as the daemon orders them."""

    def __init__(self, single: bool) -> None:
        self.level_mL, self.standby_mL = 0.0, 0.0
        self._single, self._delivered_mL = single, math.nan

    def takes(self, order: Order) -> bool:
        """Book a filling or a change-over; ``False`` for orders that the pump itself must carry out."""
        if order.action is Action.FILL and self._single:
            self.level_mL = order.value
        elif order.action is Action.FILL:
            self.standby_mL = order.value
        elif order.action is Action.SWAP:
            self.level_mL, self.standby_mL = self.standby_mL, self.level_mL
        return order.action in (Action.FILL, Action.SWAP)

    def drew(self, delivered_mL: float) -> None:
        """Book what was delivered since the last poll; an empty account goes on with the other one."""
        if delivered_mL > self._delivered_mL:
            self.level_mL -= delivered_mL - self._delivered_mL
        self._delivered_mL = delivered_mL
        if self.level_mL <= 0 < self.standby_mL:
            self.level_mL, self.standby_mL = self.level_mL + self.standby_mL, 0.0
        self.level_mL = max(self.level_mL, 0.0)


class CardDevice:
    """Implements ``rigd.ports.driver.Driver`` for one card."""

    def __init__(self, spec: DeviceSpec) -> None:
        card = load_card(Path(read_options(spec, CardOptions).card))
        if card.modbus and spec.address and not (spec.address.isdecimal() and 0 <= int(spec.address) <= 255):
            raise refuse(spec, "address-wrong", "address", f"found {spec.address!r}", "a Modbus unit, '0' to '255'")
        retries = spec.facts.get("retries", 2)
        self._spec, self._card = spec, card
        self._talk = Talk(card, spec.id, spec.address, retries if isinstance(retries, int) else 2)
        self._ordered: dict[str, float] = {}
        self._totals: dict[str, tuple[float, float]] = {}
        self._account = Account(spec.facts.get("syringes") == 1) if card.continuous else None

    async def identify(self, line: Line) -> DeviceIdentity:
        """Ask what the card's identity says; a device that tells nothing has the card's names."""
        identity = self._card.identity
        seen: dict[str, str | float] = {}
        for name, wanted in identity.expect.items():
            found = await self._talk.read(line, name, seen)
            if found != wanted:
                raise NotTheDevice(f"{self._spec.id}: {name} is {found!r}, the card expects {wanted!r}")
        serial = await self._talk.read(line, identity.serial, seen) if identity.serial else self._spec.serial_no
        serial_no = serial if isinstance(serial, str) else f"{serial:g}"
        return DeviceIdentity(identity.maker, identity.model, serial_no)

    async def prepare(self, line: Line) -> bool:
        """The card's preparation; the power-on sign is cleared last."""
        restarted = await self._restarted(line, {})
        self._totals.clear()
        for step in self._card.prepare:
            await self._talk.step(line, step, None)
        if restarted and self._card.power_on is not None:
            for step in self._card.power_on.clear:
                await self._talk.step(line, step, None)
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """The channels asked for, each question once; then the heartbeat."""
        account = self._account
        for channel in channels:
            if channel not in self._card.channels and (account is None or channel not in ("level", "standby")):
                known = ", ".join(self._card.channels)
                raise LocalProtocolError(f"{self._spec.id}: no channel {channel!r}; the card has {known}")
        seen: dict[str, str | float] = {}
        if await self._restarted(line, seen):
            raise DeviceProtocolError(f"{self._spec.id}: has restarted and lost its settings")
        read = [name for name in self._card.channels if name in channels or account is not None]
        values = {name: await self._reading(line, name, seen) for name in read}
        if account is not None:
            account.drew(values["delivered"].value)
            values |= {"level": Reading("level", account.level_mL), "standby": Reading("standby", account.standby_mL)}
        for step in self._card.heartbeat:
            await self._talk.step(line, step, None)
        return [values[name] for name in channels]

    async def execute(self, line: Line, order: Order) -> None:
        """The steps of one order, in turn; a stop uses the steps of the last will unless it has its own."""
        name = order.action.value
        table = self._card.orders.get(name)
        if self._account is not None and self._account.takes(order):
            return
        if table is None and order.action is not Action.STOP:
            raise DeviceRefused(f"{self._spec.id}: the card has no order {name!r}")
        if table is not None and table.range is not None and not table.range[0] <= order.value <= table.range[1]:
            low, high = table.range
            raise DeviceRefused(f"{self._spec.id}: {name} {order.value:g} is outside {low:g} to {high:g}")
        for step in self._card.stop.steps if table is None else table.steps:
            await self._talk.step(line, step, order.value)
        self._ordered[name] = order.value
        if order.action is Action.STOP:
            self._ordered[Action.DELIVER.value] = 0.0

    def last_will(self, link: LinkSpec) -> LastWill:
        """The card's stop."""
        return self._talk.last_will(link)

    async def _restarted(self, line: Line, seen: dict[str, str | float]) -> bool:
        sign = self._card.power_on
        if sign is None:
            return False
        found = await self._talk.read(line, sign.read, seen)
        return _plain(found) == _plain(sign.equals)

    async def _reading(self, line: Line, name: str, seen: dict[str, str | float]) -> Reading:
        channel = self._card.channels[name]
        if channel.constant is not None:
            return Reading(name, channel.constant)
        if channel.last_order:
            return Reading(name, self._ordered.get(channel.last_order, channel.offset))
        if channel.integral_of:
            source = await self._reading(line, channel.integral_of, seen)
            return Reading(name, self._integral(name, source.value) * channel.scale + channel.offset)
        if channel.sum:
            total = channel.offset
            for other, factor in channel.sum.items():
                total += factor * (await self._reading(line, other, seen)).value
            return Reading(name, total)
        try:
            return _value(name, channel, await self._talk.read(line, channel.read, seen))
        except (LinkTimeout, DeviceProtocolError) as error:
            if self._card.family != "sensor":
                raise
            return Reading(name, math.nan, fault=str(error))

    def _integral(self, name: str, rate_per_min: float) -> float:
        now_s = asyncio.get_running_loop().time()
        last_s, total = self._totals.get(name, (now_s, 0.0))
        total += max(rate_per_min, 0.0) * (now_s - last_s) / 60.0
        self._totals[name] = (now_s, total)
        return total


def _plain(value: str | float) -> str:
    return value if isinstance(value, str) else f"{value:g}"


def _value(name: str, channel: Channel, found: str | float) -> Reading:
    if channel.map:
        key = _plain(found)
        if key not in channel.map:
            raise DeviceProtocolError(f"{name}: {key!r} is not in the card's map {', '.join(channel.map)}")
        return Reading(name, channel.map[key])
    number = (text.number(found) if isinstance(found, str) else found) * channel.scale + channel.offset
    if not math.isfinite(number):
        return Reading(name, math.nan, fault="not a number")
    if channel.signal:
        return _signal(name, channel, number)
    if channel.unit:
        number = number * UNITS[channel.unit].factor + UNITS[channel.unit].offset
    return Reading(name, number)


def _signal(name: str, channel: Channel, number: float) -> Reading:
    if channel.signal == "4-20mA":
        low, high = channel.span or (0.0, 1.0)
        health = signals.current_health(number)
        value = signals.from_current(number, low, high)
        if channel.unit:
            value = value * UNITS[channel.unit].factor + UNITS[channel.unit].offset
        return Reading(name, value, fault=f"{number:.2f} mA: {health}" if health is signals.Health.FAILURE else "")
    kind = channel.signal.removeprefix("thermocouple-")
    value = signals.pt100_degC(number) if kind == "pt100" else signals.thermocouple_degC(kind, number)
    return Reading(name, value, fault="" if math.isfinite(value) else f"{number:g} is outside the probe's range")


def _schema(dialect: str) -> Mapping[str, object]:
    return schema_of(CardOptions)


FAMILY = DriverFamily(
    "card", CONTRACT, "any device that a protocol card declares", ("",), (), tuple(Action), CardDevice, _schema
)
