"""Text protocols as a card declares them: frames, checksums, addresses, patterns. Pure."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError
from rigd_drivers.checksums import crc16

LONGEST = 4096
_SLOT = re.compile(r"\{(value|address)(?::(0?\d{0,2}(?:\.\d)?[df]|))?\}")


def crc_ccitt(data: bytes) -> int:
    """CRC-16 of polynomial 0x1021, start 0xFFFF, not reflected; check value of "123456789" is 29B1 (CRC catalogues)."""
    crc = 0xFFFF
    for byte in data:
        crc ^= byte << 8
        for _ in range(8):
            crc = (crc << 1 ^ 0x1021) & 0xFFFF if crc & 0x8000 else crc << 1
    return crc


def lrc(data: bytes) -> int:
    """Two's complement of the sum, as of Modbus over Serial Line V1.02, 2.5.2.2."""
    return -sum(data) & 0xFF


def xor(data: bytes) -> int:
    """All bytes by exclusive or."""
    total = 0
    for byte in data:
        total ^= byte
    return total


CHECKSUMS: Mapping[str, tuple[Callable[[bytes], int], int]] = {
    "sum": (lambda data: sum(data) & 0xFF, 1),
    "xor": (xor, 1),
    "lrc": (lrc, 1),
    "crc16-modbus": (crc16, 2),
    "crc-ccitt": (crc_ccitt, 2),
}


@dataclass(frozen=True, slots=True)
class Frame:
    """How words are wrapped: ``start`` + words + checksum + ``end``."""

    start: bytes = b""
    end: bytes = b"\r"
    checksum: str = "none"
    form: str = "hex"
    covers_start: bool = False

    def wrap(self, words: str) -> bytes:
        """The bytes of one message."""
        body = self.start + words.encode("latin-1")
        return body + self._check(body) + self.end

    def unwrap(self, message: bytes) -> str | None:
        """The words of a message without its ``end``; ``None`` for a bent or foreign one."""
        at = message.rfind(self.start) if self.start else 0
        if at < 0:
            return None
        message = message[at:]
        size = len(self._check(b""))
        body, check = (message[:-size], message[-size:]) if size else (message, b"")
        if size and check.upper() != self._check(body).upper():
            return None
        return body[len(self.start) :].decode("latin-1")

    def _check(self, body: bytes) -> bytes:
        if self.checksum == "none":
            return b""
        function, size = CHECKSUMS[self.checksum]
        number = function(body if self.covers_start else body[len(self.start) :])
        if self.form == "hex":
            return f"{number:0{2 * size}X}".encode()
        return number.to_bytes(size, "little" if self.form == "low-first" else "big")


def fill(template: str, address: str, value: float | None = None) -> str:
    """A command with ``{value:.3f}`` and ``{address}`` filled in."""

    def one(slot: re.Match[str]) -> str:
        if slot[1] == "address":
            return address
        if value is None:
            raise LocalProtocolError(f"{template!r} needs a value")
        form = slot[2] or "g"
        return format(round(value) if form.endswith("d") else value, form)

    return _SLOT.sub(one, template)


def fill_pattern(pattern: str, address: str) -> str:
    """A reply pattern with ``{address}`` filled in."""
    return pattern.replace("{address}", re.escape(address))


class TextReader:
    """Finds the reply to one request: the first good frame that the pattern matches wholly."""

    def __init__(self, frame: Frame, pattern: str, errors: Mapping[str, str], echo: bytes = b"") -> None:
        self._frame, self._errors, self._echo = frame, errors, echo
        self._pattern = re.compile(pattern)
        self._kept = b""

    def feed(self, data: bytes) -> Mapping[str, str] | None:
        """Take the next bytes; the fields of the reply or ``None``."""
        self._kept = (self._kept + data)[-LONGEST:]
        if self._echo and self._kept.startswith(self._echo):
            self._kept, self._echo = self._kept[len(self._echo) :], b""
        end = self._frame.end
        while end and end in self._kept:
            message, self._kept = self._kept.split(end, 1)
            words = self._frame.unwrap(message)
            if words is None:
                continue
            if (found := self._pattern.fullmatch(words)) is not None:
                return found.groupdict()
            self._refused(words)
        return None

    def _refused(self, words: str) -> None:
        for pattern, meaning in self._errors.items():
            if re.fullmatch(pattern, words):
                raise DeviceRefused(f"refused: {meaning or words}")


def number(text: str) -> float:
    """A plain decimal number; no exponents without digits, no ``nan``."""
    if re.fullmatch(r"\s*[-+]?\d*\.?\d+(?:[eE][-+]?\d{1,2})?\s*", text, re.ASCII) is None:
        raise DeviceProtocolError(f"{text!r} is not a number")
    return float(text)
