"""The bytes of one card device: requests with their readers, and the last will. Pure."""

from __future__ import annotations

import re
from collections.abc import Callable, Collection, Mapping
from dataclasses import replace

from rigd.model.devices import LastWill, LinkSpec, WillFrame
from rigd.ports.link import ReplyReader
from rigd_drivers.card import modbus, text
from rigd_drivers.card.expressions import Value, number, parse
from rigd_drivers.card.frames import LENGTHS, Frame
from rigd_drivers.card.model import Card, Check, Question, Step

PREFIX = {"coil": 0, "discrete": 1, "input": 3, "holding": 4}
"""First digit of a register's number where a manual writes 40001 for the first holding register."""
CHECKS = 128
"""Transaction numbers of the checks of a last will begin so far behind those of its steps."""


class Words:
    """``address`` is the Modbus unit or the text address; ``parameters`` of the card, as the rig file sets them."""

    def __init__(self, card: Card, address: str, parameters: Mapping[str, Value]) -> None:
        self._card, self._address = card, address
        self.parameters: Mapping[str, Value] = {**card.parameters, **parameters, "address": address}
        self._places = {name: self._placed(name) for name in card.registers}
        self._numbered = any(
            "number" in expression.names
            for template in (card.framing.reply_start or "", *(question.reply for question in card.questions.values()))
            for expression, _ in text.slots(template)
        )

    def place(self, name: str) -> modbus.Place:
        """Where a register is on the wire."""
        return self._places[name]

    def neighbours(self, names: Collection[str]) -> list[list[str]]:
        """Registers that stand without a gap, grouped, so that one message reads each group."""
        groups: list[list[str]] = []
        first = end = 0
        for name in sorted(names, key=lambda name: (self._places[name].table, self._places[name].address)):
            place = self._places[name]
            joins = groups and self._places[groups[-1][0]].table == place.table and place.address <= end
            if joins and place.address + place.count - first <= modbus.MOST:
                groups[-1].append(name)
            else:
                groups.append([name])
                first = end = place.address
            end = max(end, place.address + place.count)
        return groups

    def register_request(self, number: int, pdu: bytes) -> tuple[bytes, ReplyReader[bytes]]:
        """A request and the reader of its reply."""
        protocol = self._card.link.protocol
        return modbus.wrap(self._unit, number, pdu, protocol), modbus.ModbusReader(self._unit, number, pdu, protocol)

    def text_request(
        self, said: Question | Step, known: Mapping[str, Value]
    ) -> tuple[bytes, Callable[[], text.TextReader]]:
        """A request and the maker of readers of its reply."""
        framing = self._card.framing
        request = self._out(known).wrap(text.fill(said.send, known, framing.decimal)) if said.send else b""
        errors = {
            text.fill_pattern(pattern, known): why for pattern, why in (self._card.busy | self._card.errors).items()
        }
        expected = text.Expected(text.fill_pattern(said.reply, known), errors, said.lines, said.last)
        echo = request.removesuffix(framing.end.encode("latin-1")) if framing.echo and request else b""
        return request, lambda: text.TextReader(self._back(known), expected, echo=echo, numbered=self._numbered)

    def last_will(self, device: str, link: LinkSpec) -> LastWill:
        """The stop of the card as exact bytes."""
        wait_s = self._card.link.reply_timeout_s or link.reply_timeout_s
        frames: list[WillFrame] = []
        for n, step in enumerate(self._card.stop.steps):
            frames.append(self._will_step(step, n, wait_s))
            pause_s = max(step.pause_s, self._card.link.pause_s)
            if pause_s:
                frames.append(WillFrame(b"", b"", pause_s))
        checks = tuple(self._will_check(check, CHECKS + n, wait_s) for n, check in enumerate(self._card.stop.check))
        return LastWill(device, link, tuple(frames), checks)

    @property
    def _unit(self) -> int:
        return int(self._address or 1)

    def _placed(self, name: str) -> modbus.Place:
        item = self._card.registers[name]
        address, base = item.address, self._card.link.address_base
        at = round(number(parse(address)(self.parameters) if isinstance(address, str) else address))
        if base > 1:
            at -= PREFIX[item.table] * (base // 4)
        at -= min(base, 1)
        return modbus.Place(
            item.table, at, item.kind, item.word_order == "low-first", item.byte_order == "low-first", item.write,
            item.bit, item.length,
        )  # fmt: skip

    def _out(self, known: Mapping[str, Value]) -> Frame:
        framing = self._card.framing
        return Frame(
            text.fill(framing.start, known).encode("latin-1"),
            text.fill(framing.address, known).encode("latin-1"),
            (framing.end.encode("latin-1"),),
            framing.checksum,
            framing.checksum_form,
            framing.checksum_covers,
            framing.text_end.encode("latin-1"),
            length=framing.length,
            length_adds=framing.length_adds,
        )

    def _back(self, known: Mapping[str, Value]) -> Frame:
        """As requests, but for what the card says of replies."""
        framing = self._card.framing
        start = framing.start if framing.reply_start is None else framing.reply_start
        address = framing.address if framing.reply_address is None else framing.reply_address
        ends = framing.end if framing.reply_end is None else framing.reply_end
        return replace(
            self._out(known),
            start=text.fill(start, known).encode("latin-1"),
            address=text.fill(address, known).encode("latin-1"),
            ends=tuple(end.encode("latin-1") for end in ([ends] if isinstance(ends, str) else ends)),
            checksum=framing.checksum if framing.reply_checksum else "none",
            keep_end=framing.keep_end,
            size=framing.reply_size,
        )

    def _will_step(self, step: Step, n: int, wait_s: float) -> WillFrame:
        raw = 0.0 if step.set == "value" else self._constant(step)
        if not self._card.modbus:
            return self._will_words(step, {**self._known, "value": raw}, wait_s)
        if step.block:
            places = {name: self.place(name) for name in step.block}
            ordered = sorted(places, key=lambda name: places[name].address)
            words = b"".join(modbus.encode(places[name], number(step.block[name])) for name in ordered)
            pdu = modbus.write_block_pdu(places[ordered[0]].address, words)
        else:
            pdu = modbus.write_pdu(self.place(step.write), raw)
        good = pdu if pdu[0] == 22 else pdu[:5]
        return WillFrame(self._wrap(pdu, n), re.escape(self._wrap(good, n)), wait_s)

    def _will_check(self, check: Check, n: int, wait_s: float) -> WillFrame:
        if not self._card.modbus:
            return self._will_words(check, self._known, wait_s)
        place = self.place(check.read)
        numbers = check.equals if isinstance(check.equals, list) else [check.equals]
        request = self._wrap(modbus.read_pdu(place), n)
        if place.bit is None:
            frames = (self._wrap(modbus.read_reply(place, one), n) for one in numbers)
            return WillFrame(request, b"(?:%s)" % b"|".join(re.escape(frame) for frame in frames), wait_s)
        pattern, number_ = modbus.bit_pattern(place, numbers), modbus.WILL_NUMBERS + n
        return WillFrame(
            request, modbus.wrapped_pattern(self._unit, number_, pattern, self._card.link.protocol), wait_s
        )

    def _will_words(self, said: Step | Check, known: Mapping[str, Value], wait_s: float) -> WillFrame:
        request = self._out(known).wrap(text.fill(said.send, known, self._card.framing.decimal))
        if not said.reply:
            return WillFrame(request, b"", wait_s)
        return WillFrame(request, self._good(said, known), wait_s)

    def _good(self, said: Step | Check, known: Mapping[str, Value]) -> bytes:
        """The pattern of a reply in its frame; the checksum is not compared, for the words are.

        Where replies have no start mark, nothing but an end mark may stand before: "10" is no "0".
        """
        back, framing = self._back(known), self._card.framing
        ends = b"(?:%s)" % b"|".join(re.escape(end) for end in back.ends)
        start = re.escape(back.start) + b".{%d}" % LENGTHS[back.length] + re.escape(back.address)
        before = b"" if back.start else b"(?:\\A|%s|%s)" % (ends, re.escape(framing.end.encode("latin-1")))
        pattern = re.sub(r"\(\?P<\w+>", "(?:", text.fill_pattern(said.reply, known)).encode("latin-1")
        pattern = pattern.replace(b"\\n", b"\n").replace(b"\n", ends + start)
        tail = re.escape(back.text_end) + b".{%d}" % back.check_size + (b"" if back.keep_end else ends)
        return before + start + rb"\s*(?:%s)\s*" % pattern + tail

    @property
    def _known(self) -> Mapping[str, Value]:
        return {**self.parameters, "number": 0.0, "count": 0.0}

    def _constant(self, step: Step) -> float:
        found = parse(step.set)(self._known) if isinstance(step.set, str) else step.set
        return (number(found) - step.offset) / step.scale

    def _wrap(self, pdu: bytes, n: int) -> bytes:
        return modbus.wrap(self._unit, modbus.WILL_NUMBERS + n, pdu, self._card.link.protocol)
