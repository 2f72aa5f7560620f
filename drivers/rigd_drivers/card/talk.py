"""Exchanges of one card device: readings and steps over a line."""

from __future__ import annotations

import asyncio
import re
from collections.abc import Awaitable, Callable, Collection, Iterable, Mapping
from typing import TypeVar

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LinkTimeout, LocalProtocolError
from rigd.model.units import UNITS
from rigd.ports.link import Line
from rigd_drivers.card import modbus, text
from rigd_drivers.card.expressions import Value, number, parse
from rigd_drivers.card.model import Card, Question, Step
from rigd_drivers.card.words import Words
from rigd_drivers.checksums import crc16

T = TypeVar("T")
Seen = dict[str, Value]

GIVEN = frozenset(("value", "count", "number"))
"""Names in expressions that are no readings."""
POLL_S = 0.05
"""Pause between two looks at a device that is busy, or not yet where it shall be."""


class StillBusy(DeviceRefused):
    """The device said that it is busy; it may be asked again."""


class Talk:
    """How to speak with one device. ``words`` knows its bytes; ``parameters`` its address and the card's parameters."""

    def __init__(self, card: Card, device: str, words: Words, retries: int) -> None:
        self._card, self._device, self._words, self._retries = card, device, words, retries
        # devices of one unit on one link number their requests apart, or one could take the other's late reply
        self._first = crc16(device.encode()) % (modbus.WILL_NUMBERS >> 8) << 8
        self._number = 0
        self._count = 0
        self._apart = not card.modbus

    def known(self, seen: Mapping[str, Value] | None = None) -> Seen:
        """Names that need no device: address, parameters, ``count``; and what has been seen."""
        return {**self._words.parameters, "count": float(self._count), **(seen or {})}

    def beat(self) -> None:
        """Count on; ``count`` is what a heartbeat may write."""
        self._count = (self._count + 1) % 65536

    async def read(self, line: Line, formula: str, seen: Seen) -> Value:
        """What an expression of readings says; ``seen`` keeps what this poll has already asked."""
        expression = parse(formula)
        await self.fetch(line, expression.names, seen)
        return expression(self.known(seen))

    async def fetch(self, line: Line, names: Collection[str], seen: Seen) -> None:
        """Ask for all of these readings that are not in ``seen`` yet; neighbouring registers in one message."""
        given = seen.keys() | self._words.parameters.keys() | GIVEN
        missing = [name for name in names if name not in given]
        if self._card.modbus:
            await self._registers(line, missing, seen)
            return
        asked = {name.partition(".")[0] for name in missing}
        for question, item in self._card.questions.items():
            if question in asked:
                fields = await self._ask_words(line, item, self.known(seen))
                seen.update({f"{question}.{field}": self._plain(value) for field, value in fields.items()})

    def _plain(self, field: str) -> str:
        """A field of a reply, with a point where the device writes a decimal comma."""
        comma = self._card.framing.decimal == "," and re.fullmatch(r"\s*[-+]?\d*,\d+\s*", field)
        return field.replace(",", ".") if comma else field

    async def step(self, line: Line, step: Step, value: float | None, once: bool = False) -> None:
        """One step of an order, and its proof; ``once``: not said again when no answer came."""
        again = not (once or step.once)
        seen: Seen = {}
        if step.when and not bool(await self._formula(line, step.when, step, value, seen)):
            return
        raw = await self._raw(line, step, value, seen)
        if step.write:
            await self._write(line, step, raw, again)
        elif step.block:
            await self._block(line, step, value, seen, again)
        elif step.send:
            await self._ask_words(line, step, await self._slots(line, step, raw, seen), again)
        if step.pause_s:
            await asyncio.sleep(step.pause_s)
        if step.confirm:
            await self._agrees(line, step, raw, lambda: self.read(line, step.confirm, {}), step.confirm)
        if step.until:
            await self._until(line, step, value)

    async def steps(self, line: Line, steps: Iterable[Step], value: float | None = None, once: bool = False) -> None:
        """Several, in turn."""
        for step in steps:
            await self.step(line, step, value, once)

    async def _formula(self, line: Line, formula: str, step: Step, value: float | None, seen: Seen) -> Value:
        """An expression of the order's value (in the step's unit) and of readings."""
        expression = parse(formula)
        await self.fetch(line, expression.names, seen)
        return expression(self.known(seen) | _own(step, value))

    async def _raw(self, line: Line, step: Step, value: float | None, seen: Seen) -> float:
        """The number that goes on the wire; 0 for a step that has none."""
        if isinstance(step.set, str) and step.set != "value":
            return scaled(step, number(await self._formula(line, step.set, step, value, seen)))
        if step.set == "value" and value is None:
            return 0.0
        return scaled(step, _own(step, value)["value"] if step.set == "value" else float(step.set))

    async def _slots(self, line: Line, step: Step, raw: float, seen: Seen) -> Seen:
        """Everything that a command's slots ask for."""
        names = frozenset().union(*(expression.names for expression, _ in text.slots(step.send)))
        await self.fetch(line, names, seen)
        return self.known(seen) | {"value": raw}

    async def _write(self, line: Line, step: Step, raw: float, again: bool) -> None:
        place = self._words.place(step.write)
        if place.bit is not None and place.write != "mask":
            word = (await self._pdu(line, modbus.read_pdu(place)))[2:]
            word = modbus.with_bit(place, word, bool(raw))
            request = modbus.write_block_pdu(place.address, word)
            if place.write == "single":
                request = bytes([6]) + request[1:3] + word
        else:
            request = modbus.write_pdu(place, raw)
        await self._pdu(line, request, again)
        if step.verify:
            await self._verified(line, step, step.write, raw)

    async def _block(self, line: Line, step: Step, value: float | None, seen: Seen, again: bool) -> None:
        """Several neighbouring registers in one message; values stand as they are, without scale."""
        numbers = {
            name: number(await self._formula(line, formula, step, value, seen)) if isinstance(formula, str) else formula
            for name, formula in step.block.items()
        }
        places = {name: self._words.place(name) for name in numbers}
        ordered = sorted(places, key=lambda name: places[name].address)
        words = b"".join(modbus.encode(places[name], numbers[name]) for name in ordered)
        await self._pdu(line, modbus.write_block_pdu(places[ordered[0]].address, words), again)
        for name in ordered if step.verify else ():
            await self._verified(line, step, name, numbers[name])

    async def _verified(self, line: Line, step: Step, name: str, raw: float) -> None:
        """Read a register back: what stands there is what its type can hold of the number."""
        place = self._words.place(name)
        wanted = raw
        if place.bit is None and not place.bits:
            wanted = number(modbus.decode(place, modbus.encode(place, raw)))

        async def stands() -> Value:
            return modbus.decode(place, (await self._pdu(line, modbus.read_pdu(place)))[2:])

        await self._agrees(line, step, wanted, stands, name)

    async def _agrees(
        self, line: Line, step: Step, wanted: float, ask: Callable[[], Awaitable[Value]], what: str
    ) -> None:
        end_s = asyncio.get_running_loop().time() + step.within_s
        while True:
            found = number(await ask())
            if abs(found - wanted) <= step.tolerance + 1e-6 * abs(wanted):
                return
            if asyncio.get_running_loop().time() >= end_s:
                raise DeviceProtocolError(f"{self._device}: {wanted:g} was ordered, but {what} is {found:g}")
            await asyncio.sleep(POLL_S)

    async def _until(self, line: Line, step: Step, value: float | None) -> None:
        end_s = asyncio.get_running_loop().time() + step.within_s
        while not bool(await self._formula(line, step.until, step, value, {})):
            if asyncio.get_running_loop().time() >= end_s:
                raise DeviceProtocolError(f"{self._device}: {step.until!r} is not so after {step.within_s:g} s")
            await asyncio.sleep(POLL_S)

    async def _registers(self, line: Line, names: Collection[str], seen: Seen) -> None:
        groups = [[name] for name in names] if self._apart else self._words.neighbours(names)
        for group in groups:
            places = [self._words.place(name) for name in group]
            last = places[-1]
            span = last.address + last.count - places[0].address
            try:
                body = (await self._pdu(line, modbus.read_pdu(places[0], span)))[2:]
            except modbus.Refused:
                if len(group) == 1:
                    raise
                self._apart = True  # a device that gives its registers only one by one
                await self._registers(line, [name for name in names if name not in seen], seen)
                return
            for name, place in zip(group, places, strict=True):
                at = place.address - places[0].address
                part = bytes([body[at // 8] >> at % 8]) if place.bits else body[2 * at : 2 * (at + place.count)]
                seen[name] = modbus.decode(place, part)

    async def _pdu(self, line: Line, pdu: bytes, again: bool = True) -> bytes:
        async def exchange() -> bytes:
            self._number = (self._number + 1) % 256
            request, reader = self._words.register_request(self._first | self._number, pdu)
            try:
                return await line.ask(request, reader, timeout_s=self._card.link.reply_timeout_s)
            except modbus.Refused as error:
                if error.code in (modbus.BUSY, modbus.STILL_WORKING):
                    raise StillBusy(str(error)) from error
                raise

        return await self._patiently(exchange, again)

    async def _ask_words(self, line: Line, said: Question | Step, known: Seen, again: bool = True) -> Mapping[str, str]:
        self._number = (self._number + 1) % 10_000
        request, reader = self._words.text_request(said, known | {"number": float(self._number)})

        async def exchange() -> Mapping[str, str]:
            wait_s = said.timeout_s or self._card.link.reply_timeout_s
            listens = reader()
            try:
                return await line.ask(request, listens, timeout_s=wait_s)
            except LinkTimeout as error:
                heard = f"; heard {listens.unknown!r}, which no pattern of the card fits" if listens.unknown else ""
                raise LinkTimeout(f"{error}{heard}") from error
            except DeviceRefused as error:
                if any(f"refused: {meaning}" in str(error) for meaning in self._card.busy.values()):
                    raise StillBusy(str(error)) from error
                raise

        return await self._patiently(exchange, again)

    async def _patiently(self, exchange: Callable[[], Awaitable[T]], again: bool) -> T:
        """An exchange, again when no answer came (so many times) and when the device is busy (so long)."""
        loop = asyncio.get_running_loop()
        left, busy_until_s = self._retries if again else 0, loop.time() + self._card.link.busy_s
        while True:
            if self._card.link.pause_s:  # before each: the one before may have been another device's on this line
                await asyncio.sleep(self._card.link.pause_s)
            try:
                return await exchange()
            except LinkTimeout as error:
                left -= 1
                if left < 0:
                    raise LinkTimeout(f"{self._device}: {error}") from error
            except StillBusy as error:
                if loop.time() >= busy_until_s:
                    raise DeviceRefused(f"{self._device}: {error}") from error
                await asyncio.sleep(POLL_S)
            except modbus.Refused as error:
                raise modbus.Refused(error.code, self._device) from error
            except (DeviceRefused, DeviceProtocolError) as error:
                raise type(error)(f"{self._device}: {error}") from error


def _own(step: Step, value: float | None) -> dict[str, float]:
    """``value`` in the unit of the step."""
    if value is None:
        return {}
    unit = UNITS[step.unit] if step.unit else None
    return {"value": value if unit is None else (value - unit.offset) / unit.factor}


def scaled(step: Step, found: float) -> float:
    """What stands on the wire for a number: what ``map`` says, or (number - offset) / scale."""
    if step.map:
        key = f"{found:g}"
        if key not in step.map:
            raise LocalProtocolError(f"value {key} is not in the card's map {', '.join(step.map)}")
        return step.map[key]
    return (found - step.offset) / step.scale
