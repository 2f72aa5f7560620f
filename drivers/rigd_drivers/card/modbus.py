"""Modbus RTU and TCP: requests, replies, register types. Pure.

Modbus Application Protocol V1.1b3; Modbus over Serial Line V1.02; Modbus Messaging on TCP/IP V1.0b.
"""

from __future__ import annotations

import math
import struct
from dataclasses import dataclass

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError
from rigd_drivers.checksums import crc16

READ = {"coil": 1, "discrete": 2, "holding": 3, "input": 4}
TYPES = {"bit": "", "u16": "H", "s16": "h", "u32": "I", "s32": "i", "f32": "f", "f64": "d"}
REFUSALS = {
    1: "illegal function", 2: "illegal data address", 3: "illegal data value", 4: "server device failure",
    5: "acknowledge: still working", 6: "server device busy", 8: "memory parity error",
    10: "gateway path unavailable", 11: "gateway target does not answer",
}  # fmt: skip
WILL_NUMBERS = 0xFF00
"""Transaction numbers from here on belong to last wills; drivers stay below."""


@dataclass(frozen=True, slots=True)
class Place:
    """Where a value lives: table, address on the wire (0-based), type, word and byte order."""

    table: str
    address: int
    type: str
    low_word_first: bool = False
    low_byte_first: bool = False
    single: bool = True

    @property
    def count(self) -> int:
        """Registers (or bits) that it fills."""
        return 1 if self.type == "bit" else struct.calcsize(">" + TYPES[self.type]) // 2


def read_pdu(place: Place) -> bytes:
    """Request to read a place."""
    return struct.pack(">BHH", READ[place.table], place.address, place.count)


def write_pdu(place: Place, number: float) -> bytes:
    """Request to write a number; ``LocalProtocolError`` when the type cannot hold it."""
    if place.table == "coil":
        if number not in (0, 1):
            raise LocalProtocolError(f"a coil takes 0 or 1, not {number:g}")
        return struct.pack(">BHH", 5, place.address, 0xFF00 if number else 0)
    if place.table != "holding":
        raise LocalProtocolError(f"a {place.table} cannot be written")
    words = _words(place, number)
    if place.count == 1 and place.single:
        return struct.pack(">BH", 6, place.address) + words
    return struct.pack(">BHHB", 16, place.address, place.count, len(words)) + words


def read_reply(place: Place, number: float) -> bytes:
    """The reply PDU of a device that holds this number; for checks of last wills."""
    body = bytes([int(number) & 1]) if place.type == "bit" else _words(place, number)
    return bytes([READ[place.table], len(body)]) + body


def decode(place: Place, pdu: bytes) -> float:
    """The number in a reply to ``read_pdu``."""
    body = pdu[2:]
    if place.type == "bit":
        return float(body[0] & 1)
    return float(struct.unpack(">" + TYPES[place.type], _order(place, body))[0])


def written(request: bytes, pdu: bytes) -> bool:
    """Whether a reply confirms a write: it repeats address and value (or count)."""
    return pdu[:5] == request[:5]


def wrap(unit: int, number: int, pdu: bytes, *, tcp: bool) -> bytes:
    """The frame of a PDU; ``number`` is the transaction of Modbus TCP."""
    if tcp:
        return struct.pack(">HHHB", number, 0, len(pdu) + 1, unit) + pdu
    body = bytes([unit]) + pdu
    return body + crc16(body).to_bytes(2, "little")


class ModbusReader:
    """Finds the reply PDU to one request; see ``rigd.ports.link.ReplyReader``."""

    def __init__(self, unit: int, number: int, pdu: bytes, *, tcp: bool) -> None:
        self.numbered = tcp
        self._unit, self._number, self._pdu, self._tcp = unit, number, pdu, tcp
        self._kept = b""

    def feed(self, data: bytes) -> bytes | None:
        """Take the next bytes; the reply PDU or ``None``."""
        self._kept = (self._kept + data)[-4096:]
        found = self._tcp_pdu() if self._tcp else self._rtu_pdu()
        if found is not None and found[0] & 0x80:
            raise DeviceRefused(f"refused: {REFUSALS.get(found[1], f'exception {found[1]}')}")
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
        return None

    def _length(self) -> int:
        function = self._pdu[0]
        count = int.from_bytes(self._pdu[3:5], "big")
        return 5 if function > 4 else 2 + (2 * count if function > 2 else -(-count // 8))

    def _mine(self, pdu: bytes) -> bool:
        function = self._pdu[0]
        if len(pdu) == 2:
            return pdu[0] == function | 0x80
        if function > 4:
            return written(self._pdu, pdu) and pdu[0] == function
        return pdu[0] == function and pdu[1] == len(pdu) - 2


def _words(place: Place, number: float) -> bytes:
    form = TYPES[place.type]
    try:
        value = number if form in "fd" else round(number)
        if not math.isfinite(number):
            raise ValueError
        return _order(place, struct.pack(">" + form, value))
    except (struct.error, ValueError, OverflowError):
        raise LocalProtocolError(f"{number:g} does not fit a register of type {place.type}") from None


def _order(place: Place, body: bytes) -> bytes:
    words = [body[i : i + 2] for i in range(0, len(body), 2)]
    if place.low_word_first:
        words.reverse()
    return b"".join(word[::-1] if place.low_byte_first else word for word in words)
