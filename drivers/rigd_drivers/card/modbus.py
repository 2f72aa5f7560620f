"""Modbus RTU, ASCII and TCP: requests, replies, register types. Pure.

Modbus Application Protocol V1.1b3; Modbus over Serial Line V1.02; Modbus Messaging on TCP/IP V1.0b.
"""

from __future__ import annotations

import math
import re
import struct
from collections.abc import Sequence
from dataclasses import dataclass, replace

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError
from rigd_drivers.card.frames import lrc
from rigd_drivers.checksums import crc16

READ = {"coil": 1, "discrete": 2, "holding": 3, "input": 4}
TYPES = {
    "bit": "", "text": "", "u16": "H", "s16": "h", "u32": "I", "s32": "i", "f32": "f", "u64": "Q", "s64": "q",
    "f64": "d",
}  # fmt: skip
REFUSALS = {
    1: "illegal function", 2: "illegal data address", 3: "illegal data value", 4: "server device failure",
    5: "acknowledge: still working", 6: "server device busy", 8: "memory parity error",
    10: "gateway path unavailable", 11: "gateway target does not answer",
}  # fmt: skip
STILL_WORKING, BUSY = 5, 6
WILL_NUMBERS = 0xFF00
"""Transaction numbers from here on belong to last wills; drivers stay below."""
MOST = 120
"""Registers read at once at the most (the protocol allows 125)."""

Value = float | str


class Refused(DeviceRefused):
    """An exception reply with its ``code``."""

    def __init__(self, code: int, device: str = "") -> None:
        head = f"{device}: " if device else ""
        super().__init__(f"{head}refused: {REFUSALS.get(code, f'exception {code}')}")
        self.code = code


@dataclass(frozen=True, slots=True)
class Place:
    """Where a value lives: table, address on the wire (0-based), type, word and byte order.

    ``bit`` picks one bit (0 is the lowest) of a 16-bit word; ``length`` is that of a text in registers. ``write`` is
    "single", "multiple" (the function codes 5 and 6, or 15 and 16) or "mask" (22: only this bit changes).
    """

    table: str
    address: int
    type: str
    low_word_first: bool = False
    low_byte_first: bool = False
    write: str = "single"
    bit: int | None = None
    length: int = 0

    @property
    def count(self) -> int:
        """Registers (or bits) that it fills."""
        if self.type == "text":
            return self.length
        return 1 if self.type == "bit" else struct.calcsize(">" + TYPES[self.type]) // 2

    @property
    def bits(self) -> bool:
        """Whether its table holds single bits."""
        return self.table in ("coil", "discrete")


def read_pdu(place: Place, count: int = 0) -> bytes:
    """Request to read a place, or ``count`` registers from it on."""
    return struct.pack(">BHH", READ[place.table], place.address, count or place.count)


def write_pdu(place: Place, number: float) -> bytes:
    """Request to write a number; ``LocalProtocolError`` when the type cannot hold it."""
    if place.table == "coil":
        if number not in (0, 1):
            raise LocalProtocolError(f"a coil takes 0 or 1, not {number:g}")
        if place.write == "multiple":
            return struct.pack(">BHHBB", 15, place.address, 1, 1, int(number))
        return struct.pack(">BHH", 5, place.address, 0xFF00 if number else 0)
    if place.table != "holding":
        raise LocalProtocolError(f"a {place.table} cannot be written")
    if place.bit is not None and place.write == "mask":
        mask = _mask(place)
        return struct.pack(">BHHH", 22, place.address, 0xFFFF & ~mask, mask if number else 0)
    words = encode(place, number)
    if place.count == 1 and place.write == "single":
        return struct.pack(">BH", 6, place.address) + words
    return write_block_pdu(place.address, words)


def write_block_pdu(address: int, words: bytes) -> bytes:
    """Request to write registers one after the other, in one message."""
    return struct.pack(">BHHB", 16, address, len(words) // 2, len(words)) + words


def read_reply(place: Place, number: float) -> bytes:
    """The reply PDU of a device that holds this number."""
    body = bytes([int(number) & 1]) if place.bits else encode(place, number)
    return bytes([READ[place.table], len(body)]) + body


def bit_pattern(place: Place, numbers: Sequence[float]) -> bytes:
    """Bytes regular expression of the reply PDU of a device whose ``bit`` is one of these numbers; for last wills."""
    mask, wanted = _mask(place), {bool(number) for number in numbers}
    halves = []
    for part in (mask >> 8, mask & 0xFF):
        fitting = [byte for byte in range(256) if bool(byte & part) in wanted]
        halves.append(b"[%s]" % b"".join(b"\\x%02x" % byte for byte in fitting) if part else b".")
    return re.escape(bytes([READ[place.table], 2])) + b"".join(halves)


def decode(place: Place, body: bytes) -> Value:
    """The value in the data of a reply (registers in the order of the wire, or packed bits)."""
    if place.bits:
        return float(body[0] & 1)
    if place.type == "text":
        return _order(replace(place, low_word_first=False), body).decode("latin-1").strip("\0 ")
    ordered = _order(place, body)
    if place.bit is not None:
        return float(struct.unpack(">H", ordered)[0] >> place.bit & 1)
    return float(struct.unpack(">" + TYPES[place.type], ordered)[0])


def written(request: bytes, pdu: bytes) -> bool:
    """Whether a reply confirms a write: it repeats address and value (or count, or both masks)."""
    return pdu == request if request[0] == 22 else pdu[:5] == request[:5]


def wrap(unit: int, number: int, pdu: bytes, protocol: str) -> bytes:
    """The frame of a PDU; ``number`` is the transaction of Modbus TCP."""
    if protocol == "modbus-tcp":
        return struct.pack(">HHHB", number, 0, len(pdu) + 1, unit) + pdu
    body = bytes([unit]) + pdu
    if protocol == "modbus-ascii":
        return b":" + (body + bytes([lrc(body)])).hex().upper().encode() + b"\r\n"
    return body + crc16(body).to_bytes(2, "little")


def wrapped_pattern(unit: int, number: int, pattern: bytes, protocol: str) -> bytes:
    """Bytes regular expression of the frame of a reply of one word whose PDU matches ``pattern``; not for ASCII."""
    if protocol == "modbus-tcp":
        return re.escape(struct.pack(">HHHB", number, 0, 5, unit)) + pattern
    return re.escape(bytes([unit])) + pattern + b".."


class ModbusReader:
    """Finds the reply PDU to one request; see ``rigd.ports.link.ReplyReader``."""

    def __init__(self, unit: int, number: int, pdu: bytes, protocol: str) -> None:
        self.numbered = protocol == "modbus-tcp"
        self._unit, self._number, self._pdu = unit, number, pdu
        self._find = {"modbus-tcp": self._tcp_pdu, "modbus-ascii": self._ascii_pdu}.get(protocol, self._rtu_pdu)
        self._kept = b""

    def feed(self, data: bytes) -> bytes | None:
        """Take the next bytes; the reply PDU or ``None``."""
        self._kept = (self._kept + data)[-4096:]
        found = self._find()
        if found is not None and found[0] & 0x80:
            raise Refused(found[1])
        return found

    def _tcp_pdu(self) -> bytes | None:
        while len(self._kept) >= 7:
            number, protocol, length, unit = struct.unpack(">HHHB", self._kept[:7])
            if protocol or not 3 <= length <= 254:
                self._kept = self._kept[1:]
                continue
            if len(self._kept) < 6 + length:
                return None
            pdu, self._kept = self._kept[7 : 6 + length], self._kept[6 + length :]
            if number == self._number and unit == self._unit:
                if len(pdu) not in (2, self._length()) or not self._mine(pdu):
                    raise DeviceProtocolError(f"reply {pdu.hex(' ')} does not fit the request {self._pdu.hex(' ')}")
                return pdu
        return None

    def _rtu_pdu(self) -> bytes | None:
        for start in range(len(self._kept)):
            for length in (2, self._length()):
                frame = self._kept[start : start + length + 3]
                fits = len(frame) == length + 3 and frame[0] == self._unit and self._mine(frame[1:-2])
                if fits and crc16(frame[:-2]) == int.from_bytes(frame[-2:], "little"):
                    return frame[1:-2]
        self._kept = self._kept[-self._length() - 2 :]  # what stands before cannot become the reply any more
        return None

    def _ascii_pdu(self) -> bytes | None:
        while b"\n" in self._kept:
            line, self._kept = self._kept.split(b"\n", 1)
            found = re.fullmatch(rb".*:((?:[0-9A-F]{2}){4,256})\r", line, re.DOTALL)
            if found is None:
                continue
            frame = bytes.fromhex(found[1].decode("ascii"))
            if lrc(frame[:-1]) == frame[-1] and frame[0] == self._unit and self._mine(frame[1:-1]):
                return frame[1:-1]
        return None

    def _length(self) -> int:
        function = self._pdu[0]
        count = int.from_bytes(self._pdu[3:5], "big")
        if function == 22:
            return 7
        return 5 if function > 4 else 2 + (2 * count if function > 2 else -(-count // 8))

    def _mine(self, pdu: bytes) -> bool:
        function = self._pdu[0]
        if len(pdu) == 2:
            return pdu[0] == function | 0x80
        if len(pdu) != self._length():
            return False
        if function > 4:
            return written(self._pdu, pdu) and pdu[0] == function
        return pdu[0] == function and pdu[1] == len(pdu) - 2


def encode(place: Place, number: float) -> bytes:
    """The registers of a number as they stand on the wire; ``LocalProtocolError`` when the type cannot hold it."""
    form = TYPES[place.type]
    try:
        value = number if form in tuple("fd") else round(number)
        if not math.isfinite(number):
            raise ValueError
        return _order(place, struct.pack(">" + form, value))
    except (struct.error, ValueError, OverflowError):
        raise LocalProtocolError(f"{number:g} does not fit a register of type {place.type}") from None


def with_bit(place: Place, body: bytes, on: bool) -> bytes:
    """The word of a read reply with this place's bit changed, as it is to be written back."""
    (word,) = struct.unpack(">H", body)
    mask = _mask(place)
    return struct.pack(">H", word | mask if on else word & ~mask)


def _mask(place: Place) -> int:
    mask = 1 << (place.bit or 0)
    return (mask << 8 | mask >> 8) & 0xFFFF if place.low_byte_first else mask


def _order(place: Place, body: bytes) -> bytes:
    words = [body[i : i + 2] for i in range(0, len(body), 2)]
    if place.low_word_first:
        words.reverse()
    return b"".join(word[::-1] if place.low_byte_first else word for word in words)
