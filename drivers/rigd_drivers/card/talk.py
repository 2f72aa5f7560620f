"""Exchanges of one card device: readings and steps over a line, and the same as frames of a last will."""

from __future__ import annotations

import re
from collections.abc import Mapping
from typing import TypeVar

from rigd.model.devices import LastWill, LinkSpec, WillFrame
from rigd.model.errors import DeviceProtocolError, DeviceRefused, LinkTimeout, LocalProtocolError
from rigd.model.units import UNITS
from rigd.ports.link import Line, ReplyReader
from rigd_drivers.card import modbus, text
from rigd_drivers.card.model import Card, Check, Register, Step

T = TypeVar("T")


class Talk:
    """How to speak with one device; ``address`` is the Modbus unit or the text address."""

    def __init__(self, card: Card, device: str, address: str, retries: int) -> None:
        self._card, self._device, self._address, self._retries = card, device, address, retries
        self._number = 0
        frame = card.framing
        kind = (frame.checksum, frame.checksum_form, frame.checksum_covers_start)
        start, end = text.fill(frame.start, address), frame.end
        self._out = text.Frame(start.encode("latin-1"), end.encode("latin-1"), *kind)
        back = text.fill(frame.start if frame.reply_start is None else frame.reply_start, address)
        back_end = end if frame.reply_end is None else frame.reply_end
        self._back = text.Frame(back.encode("latin-1"), back_end.encode("latin-1"), *kind)

    async def read(self, line: Line, name: str, seen: dict[str, str | float]) -> str | float:
        """A register's number or a reply's field; ``seen`` keeps what this poll has already asked."""
        if name in seen:
            return seen[name]
        if self._card.modbus:
            place = self._place(name)
            seen[name] = modbus.decode(place, await self._pdu(line, modbus.read_pdu(place)))
        else:
            question = name.partition(".")[0]
            item = self._card.questions[question]
            fields = await self._words(line, item.send, item.reply, None)
            seen.update({f"{question}.{field}": value or "" for field, value in fields.items()})
        return seen[name]

    async def step(self, line: Line, step: Step, value: float | None) -> None:
        """One step of an order, and its proof."""
        number = raw(step, value)
        if self._card.modbus:
            await self._write(line, step, number or 0.0)
        else:
            await self._words(line, step.send, step.reply, number)
        if step.confirm and number is not None:
            found = await self.read(line, step.confirm, {})
            has = text.number(found) if isinstance(found, str) else found
            if abs(has - number) > step.tolerance + 1e-6 * abs(number):
                raise DeviceProtocolError(f"{self._device}: {number:g} was ordered, {step.confirm} is {has:g}")

    async def _write(self, line: Line, step: Step, number: float) -> None:
        place = self._place(step.write)
        await self._pdu(line, modbus.write_pdu(place, number))
        if step.verify:
            wanted = modbus.read_reply(place, number)
            found = await self._pdu(line, modbus.read_pdu(place))
            if found != wanted:
                has = modbus.decode(place, found)
                raise DeviceProtocolError(f"{self._device}: wrote {number:g} to {step.write}, but {has:g} stands there")

    def last_will(self, link: LinkSpec) -> LastWill:
        """The stop of the card as exact bytes."""
        wait_s = self._card.link.reply_timeout_s or link.reply_timeout_s
        frames = tuple(self._will_step(step, n, wait_s) for n, step in enumerate(self._card.stop.steps))
        checks = tuple(self._will_check(check, 128 + n, wait_s) for n, check in enumerate(self._card.stop.check))
        return LastWill(self._device, link, frames, checks)

    def _will_step(self, step: Step, n: int, wait_s: float) -> WillFrame:
        if self._card.modbus:
            pdu = modbus.write_pdu(self._place(step.write), raw(step, None) or 0.0)
            return WillFrame(self._wrap(pdu, n), re.escape(self._wrap(pdu[:5], n)), wait_s)
        return self._will_words(step.send, step.reply, wait_s)

    def _will_check(self, check: Check, n: int, wait_s: float) -> WillFrame:
        if self._card.modbus:
            place = self._place(check.read)
            good = self._wrap(modbus.read_reply(place, check.equals), n)
            return WillFrame(self._wrap(modbus.read_pdu(place), n), re.escape(good), wait_s)
        return self._will_words(check.send, check.reply, wait_s)

    def _will_words(self, send: str, reply: str, wait_s: float) -> WillFrame:
        request = self._out.wrap(text.fill(send, self._address))
        if not reply:
            return WillFrame(request, b"", wait_s)
        pattern = re.sub(r"\(\?P<\w+>", "(?:", text.fill_pattern(reply, self._address)).encode("latin-1")
        size = 0 if self._back.checksum == "none" else len(self._back.wrap("")) - len(self._back.start + self._back.end)
        good = b"(?:%s)(?:%s).{%d}%s" % (re.escape(self._back.start), pattern, size, re.escape(self._back.end))
        return WillFrame(request, good, wait_s)

    def _wrap(self, pdu: bytes, n: int) -> bytes:
        return modbus.wrap(int(self._address or 1), modbus.WILL_NUMBERS + n, pdu, tcp=self._tcp)

    @property
    def _tcp(self) -> bool:
        return self._card.link.protocol == "modbus-tcp"

    def _place(self, name: str) -> modbus.Place:
        item: Register = self._card.registers[name]
        return modbus.Place(
            item.table, item.address - self._card.link.address_base, item.type,
            item.word_order == "low-first", item.byte_order == "low-first", item.write == "single",
        )  # fmt: skip

    async def _pdu(self, line: Line, pdu: bytes) -> bytes:
        unit = int(self._address or 1)
        for left in range(self._retries, -1, -1):
            self._number = (self._number + 1) % modbus.WILL_NUMBERS
            reader = modbus.ModbusReader(unit, self._number, pdu, tcp=self._tcp)
            try:
                return await self._ask(line, modbus.wrap(unit, self._number, pdu, tcp=self._tcp), reader)
            except LinkTimeout:
                if not left:
                    raise
            except DeviceRefused as error:
                if not left or "busy" not in str(error):
                    raise
        raise AssertionError("unreachable")

    async def _words(self, line: Line, send: str, reply: str, value: float | None) -> Mapping[str, str]:
        request = self._out.wrap(text.fill(send, self._address, value))
        echo = request if self._card.framing.echo else b""
        pattern = text.fill_pattern(reply, self._address)
        for left in range(self._retries, -1, -1):
            reader = text.TextReader(self._back, pattern, self._card.errors | self._card.busy, echo)
            try:
                return await self._ask(line, request, reader)
            except LinkTimeout:
                if not left:
                    raise
            except DeviceRefused as error:
                if not left or not any(f"refused: {meaning}" in str(error) for meaning in self._card.busy.values()):
                    raise
        raise AssertionError("unreachable")

    async def _ask(self, line: Line, request: bytes, reader: ReplyReader[T]) -> T:
        try:
            return await line.ask(request, reader, timeout_s=self._card.link.reply_timeout_s)
        except (LinkTimeout, DeviceRefused, DeviceProtocolError) as error:
            raise type(error)(f"{self._device}: {error}") from error


def raw(step: Step, value: float | None) -> float | None:
    """The number on the wire of a step: its own, or the order's value in the device's unit."""
    number = value if step.set == "value" else step.set
    if number is None:
        return None
    if step.map:
        key = f"{number:g}"
        if key not in step.map:
            raise LocalProtocolError(f"value {key} is not in the card's map {', '.join(step.map)}")
        return step.map[key]
    if step.set == "value" and step.unit:
        number = (number - UNITS[step.unit].offset) / UNITS[step.unit].factor
    return (number - step.offset) / step.scale
