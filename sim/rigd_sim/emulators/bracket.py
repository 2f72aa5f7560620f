"""Frames of the bracket protocol as a device sees them (sim/MANUAL.md, section 1)."""

from __future__ import annotations

from dataclasses import dataclass

REQUEST_MAX_BYTES = 120
REPLY_MAX_BYTES = 4096
BROADCAST = "00"

_OPEN, _CLOSE, _LF, _CR = ord("{"), ord("}"), 0x0A, 0x0D
_HEX = frozenset(b"0123456789ABCDEF")


def _crc_table() -> tuple[int, ...]:
    table = []
    for value in range(256):
        for _ in range(8):
            value = (value >> 1) ^ 0xA001 if value & 1 else value >> 1
        table.append(value)
    return tuple(table)


_TABLE = _crc_table()


def crc16(data: bytes) -> int:
    """CRC-16 with polynomial 0xA001 (reflected) and start value 0xFFFF.

    >>> hex(crc16(b"123456789"))
    '0x4b37'
    """
    crc = 0xFFFF
    for byte in data:
        crc = (crc >> 8) ^ _TABLE[(crc ^ byte) & 0xFF]
    return crc


@dataclass(frozen=True, slots=True)
class Request:
    """A request with a right checksum: two-digit address, request number as sent, words."""

    address: str
    number: str
    words: tuple[str, ...]


def reply_frame(address: str, number: str, body: str) -> bytes:
    """The bytes of one reply. Raises ``ValueError`` for a reply longer than the manual allows."""
    text = f"({address}{number} {body})".encode("ascii")
    frame = text + b"%04X\n" % crc16(text)
    if len(frame) > REPLY_MAX_BYTES:
        raise ValueError(f"a reply of {len(frame)} bytes is longer than {REPLY_MAX_BYTES}")
    return frame


class RequestReader:
    """Finds requests in any stream of bytes; what is not a whole, right request is silently dropped.

    Holds at most one frame. An opening brace always starts anew: no word can contain one, so what came before it was
    the torn beginning of another frame.
    """

    def __init__(self) -> None:
        self._frame = bytearray()
        self._inside = False

    def feed(self, data: bytes) -> list[Request]:
        """Take the next bytes; return the requests that they complete."""
        found = []
        for byte in data:
            if byte == _OPEN:
                self._frame[:] = b"{"
                self._inside = True
            elif self._inside:
                self._frame.append(byte)
                if byte == _LF:
                    self._inside = False
                    request = _decode(bytes(self._frame))
                    if request is not None:
                        found.append(request)
                elif len(self._frame) >= REQUEST_MAX_BYTES:
                    self._inside = False
        return found


def _decode(frame: bytes) -> Request | None:
    """The request in ``{...}CCCC[CR]LF``, or ``None`` when the manual says to ignore it."""
    tail = -2 if frame[-2] == _CR else -1
    text, given = frame[: tail - 4], frame[tail - 4 : tail]
    if len(text) < 6 or text[-1] != _CLOSE or not _HEX.issuperset(given):
        return None
    if crc16(text) != int(given, 16) or any(not 0x20 <= byte <= 0x7E for byte in text):
        return None
    address, number = text[1:3], text[3:5]
    if not address.isdigit() or not _HEX.issuperset(number):
        return None
    words = text[5:-1].decode("ascii").removeprefix(" ")
    return Request(address.decode(), number.decode(), tuple(words.split(" ")))
