"""One driver for every protocol card."""

from __future__ import annotations

import asyncio
import math
from collections.abc import Mapping, Sequence
from difflib import get_close_matches
from pathlib import Path

from pydantic import Field

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError, WrongDevice
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.card.account import Account
from rigd_drivers.card.channels import Channels, plain
from rigd_drivers.card.expressions import parse
from rigd_drivers.card.load import load_card
from rigd_drivers.card.model import Card, Step
from rigd_drivers.card.talk import Seen, Talk
from rigd_drivers.card.words import Words
from rigd_drivers.options import Options, read_options, refuse, schema_of

MOST_ERRORS = 30
"""So many entries of an error queue are taken out at once."""


class CardOptions(Options):
    """``card``: the file, beside the rig file. ``parameters``: values for names that the card declares."""

    card: str = Field(description="a protocol card, e.g. 'my-pump.toml'; a relative path starts at the rig file")
    parameters: dict[str, float | str] = Field(
        default_factory=dict, description="values for the card's parameters, e.g. { n = 2 }"
    )


class NotTheDevice(WrongDevice, DeviceRefused):
    """Another device answers than the card describes."""


class CardDevice:
    """Implements ``rigd.ports.driver.Driver`` for one card."""

    def __init__(self, spec: DeviceSpec) -> None:
        options = read_options(spec, CardOptions)
        card = load_card(Path(options.card))
        _check_spec(spec, card, options)
        retries = spec.facts.get("retries", 2)
        self._spec, self._card = spec, card
        self._words = Words(card, spec.address, _parameters(spec, card, options))
        self._talk = Talk(card, spec.id, self._words, retries if isinstance(retries, int) else 2)
        self._channels = Channels(card)
        self._account = _account(spec) if card.continuous else None
        self._restart_seen = False

    @property
    def card(self) -> Card:
        """The card, as it was read."""
        return self._card

    def framed(self, words: str) -> bytes:
        """Words as the card frames them, with ``{address}`` and parameters filled in; for trying a device by hand."""
        if self._card.modbus:
            raise LocalProtocolError("a register map has no words; write bytes")
        return self._words.text_request(Step(send=words), self._talk.known())[0]

    async def identify(self, line: Line) -> DeviceIdentity:
        """Ask what the card's identity says; a device that tells nothing has the card's names."""
        await self._talk.steps(line, self._card.open)
        identity = self._card.identity
        seen: Seen = {}
        for name, wanted in identity.expect.items():
            found = await self._talk.read(line, name, seen)
            if plain(found) != plain(wanted):
                raise NotTheDevice(f"{self._spec.id}: {name} is {found!r}, the card expects {wanted!r}")
        serial = plain(await self._talk.read(line, identity.serial, seen)) if identity.serial else self._spec.serial_no
        firmware = plain(await self._talk.read(line, identity.firmware, seen)) if identity.firmware else ""
        return DeviceIdentity(identity.maker, identity.model, serial, firmware)

    async def prepare(self, line: Line) -> bool:
        """The card's preparation; a valve without feedback goes to rest; the power-on sign is cleared last."""
        restarted = await self._restarted(line, {})
        self._channels.forget()
        await self._talk.steps(line, self._card.prepare)
        await self._drain_errors(line)
        await self._required(line, {})
        await self._rest(line)
        if restarted and self._card.power_on is not None:
            await self._talk.steps(line, self._card.power_on.clear)
        self._restart_seen = False
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """The channels asked for, each question once; then the heartbeat."""
        account = self._account
        for channel in channels:
            if channel not in self._card.channels and (account is None or channel not in ("level", "standby")):
                known = ", ".join(self._card.channels)
                raise LocalProtocolError(f"{self._spec.id}: no channel {channel!r}; the card has {known}")
        seen: Seen = {}
        read = [name for name in self._card.channels if name in channels or (account and name == "delivered")]
        await self._fetch(line, read, seen)
        if await self._restarted(line, seen):
            raise DeviceProtocolError(f"{self._spec.id}: has restarted and lost its settings")
        await self._required(line, seen)
        values = self._channels.readings(read, self._talk.known(seen), asyncio.get_running_loop().time())
        if account is not None:
            account.drew(values["delivered"].value)
            values |= {"level": Reading("level", account.level_mL), "standby": Reading("standby", account.standby_mL)}
        self._talk.beat()
        await self._talk.steps(line, self._card.heartbeat)
        return [values[name] for name in channels]

    async def execute(self, line: Line, order: Order) -> None:
        """The steps of one order, in turn; a stop uses the steps of the last will unless it has its own."""
        name = order.action.value
        table = self._card.orders.get(name)
        if self._account is not None and self._account.takes(order):
            return
        if table is None and order.action is Action.CIRCULATE and self._always_circulates(order.value):
            return
        if table is None and order.action is not Action.STOP:
            raise LocalProtocolError(f"{self._spec.id}: the card has no order {name!r}")
        if not math.isfinite(order.value):
            raise LocalProtocolError(f"{self._spec.id}: {name} {order.value:g} is no number")
        if table is not None and table.range is not None and not table.range[0] <= order.value <= table.range[1]:
            low, high = table.range
            raise DeviceRefused(f"{self._spec.id}: {name} {order.value:g} is outside {low:g} to {high:g}")
        once = order.action in (Action.FILL, Action.SWAP)  # said twice they could be done twice
        await self._talk.steps(line, self._card.stop.steps if table is None else table.steps, order.value, once)
        if errors := await self._drain_errors(line):
            raise DeviceRefused(f"{self._spec.id}: {name} {order.value:g}: {'; '.join(errors)}")
        self._channels.ordered[name] = order.value
        if order.action is Action.STOP:
            self._channels.ordered[Action.DELIVER.value] = 0.0

    def last_will(self, link: LinkSpec) -> LastWill:
        """The card's stop."""
        return self._words.last_will(self._spec.id, link)

    def _always_circulates(self, value: float) -> bool:
        channel = self._card.channels.get("circulating")
        return channel is not None and channel.constant == value

    async def _rest(self, line: Line) -> None:
        """A valve that cannot tell where it is: only a move makes it known, and rest is where a stopped rig has it."""
        position = self._card.channels.get("position")
        positions, rest = self._spec.facts.get("positions"), self._spec.facts.get("rest")
        blind = position is not None and position.last_order == Action.MOVE and position.before is None
        if blind and isinstance(positions, tuple) and rest in positions:
            at = float(positions.index(rest))
            await self._talk.steps(line, self._card.orders[Action.MOVE].steps, at)
            self._channels.ordered[Action.MOVE.value] = at

    async def _fetch(self, line: Line, channels: list[str], seen: Seen) -> None:
        """All that one poll needs. Of a sensor, what the device refuses costs its own channels only."""
        sign = self._card.power_on
        formulas = [one.that for one in self._card.require] + [one.when for one in self._card.faults]
        formulas += [sign.when] if sign is not None else []
        names = self._channels.needs(channels).union(*(parse(one).names for one in formulas))
        try:
            await self._talk.fetch(line, names, seen)
        except (DeviceRefused, DeviceProtocolError):
            if self._card.family != "sensor":
                raise
            for name in sorted(names - seen.keys()):
                await self._fetch_alone(line, name, seen)

    async def _fetch_alone(self, line: Line, name: str, seen: Seen) -> None:
        try:
            await self._talk.fetch(line, {name}, seen)
        except (DeviceRefused, DeviceProtocolError) as error:
            seen[name] = f"not read: {error}"

    async def _restarted(self, line: Line, seen: Seen) -> bool:
        """Whether the power-on sign stands, or has been seen (reading it may clear it) since the last preparation."""
        if self._card.power_on is not None:
            self._restart_seen |= bool(await self._talk.read(line, self._card.power_on.when, seen))
        return self._restart_seen

    async def _required(self, line: Line, seen: Seen) -> None:
        for one in self._card.require:
            if not bool(await self._talk.read(line, one.that, seen)):
                raise DeviceProtocolError(f"{self._spec.id}: {one.that!r} is not so: {one.remedy}")

    async def _drain_errors(self, line: Line) -> list[str]:
        """What stood in the device's queue of errors, oldest first."""
        queue, found = self._card.error_queue, list[str]()
        while queue is not None and len(found) < MOST_ERRORS:
            seen: Seen = {}
            code = plain(await self._talk.read(line, queue.read, seen))
            if not code.strip("+-0"):
                break
            what = plain(await self._talk.read(line, queue.text, seen)) if queue.text else ""
            found.append(f"{code} {what}".strip())
        return found


def _parameters(spec: DeviceSpec, card: Card, options: CardOptions) -> dict[str, float | str]:
    """As the rig file sets them; else what it knows of the unit by that name (``bore_mm``); else the card's own."""
    known = {
        name: fact for name, fact in spec.facts.items() if name in card.parameters and isinstance(fact, int | float)
    }
    return {**known, **options.parameters}


def _account(spec: DeviceSpec) -> Account:
    stroke = spec.facts.get("stroke_mL")
    return Account(spec.facts.get("syringes") == 1, stroke if isinstance(stroke, float) else math.inf)


def _check_spec(spec: DeviceSpec, card: Card, options: CardOptions) -> None:
    if spec.dialect:
        raise refuse(
            spec, "dialect-wrong", "dialect", f"dialect {spec.dialect!r}", "leave it out; the card is the dialect"
        )
    if card.modbus and spec.address and not (spec.address.isdecimal() and 0 <= int(spec.address) <= 255):
        raise refuse(spec, "address-wrong", "address", f"found {spec.address!r}", "a Modbus unit, '0' to '255'")
    if spec.facts.get("continuous", card.continuous) != card.continuous and not card.continuous:
        message = "the rig file says syringes = 0, the card knows levels of syringes"
        remedy = "write continuous = true in the card, without level, standby and fill; or give the pump its syringes"
        raise refuse(spec, "continuous-differs", "options.card", message, remedy)
    has = [*card.channels, *(("level", "standby") if card.continuous else ())]
    for wanted in spec.channels:
        if wanted.channel not in has:
            near = get_close_matches(wanted.channel, has, n=1, cutoff=0.4)
            hint = f"did you mean {near[0]!r}? " if near else ""
            message = f"{wanted.tag} reads the channel {wanted.channel!r}, which the card ({card.family}) does not have"
            raise refuse(spec, "channel-unknown", "options.card", message, f"{hint}the card has {', '.join(has)}")
    for name in options.parameters:
        if name not in card.parameters:
            known = ", ".join(card.parameters) or "none"
            message, remedy = f"the card has no parameter {name!r}", f"allowed: {known}"
            raise refuse(spec, "parameter-unknown", f"options.parameters.{name}", message, remedy)
    wrong = [one for one in card.registers if not Words(card, spec.address, options.parameters).place(one).address >= 0]
    if wrong:
        raise refuse(spec, "parameter-wrong", "options.parameters", f"register {wrong[0]!r} is below 0", "correct it")


def _schema(dialect: str) -> Mapping[str, object]:
    """Schema of the device's options; for "card file" that of a card itself."""
    return (
        Card.model_json_schema(by_alias=True, mode="validation") if dialect == "card file" else schema_of(CardOptions)
    )


FAMILY = DriverFamily(
    "card", CONTRACT, "any device that a protocol card declares", ("",), (), tuple(Action), CardDevice, _schema
)
