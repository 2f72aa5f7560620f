"""How text protocols wrap their words: start, length, end, checksum; and how a frame is found in a stream. Pure."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from rigd_drivers.checksums import crc16

LONGEST = 4096
STARTS = 8
"""So many possible starts before one end are tried against the checksum."""


def crc_ccitt(data: bytes, start: int = 0xFFFF) -> int:
    """CRC-16 of polynomial 0x1021, not reflected. From 0xFFFF the check value of "123456789" is 29B1, from 0 (as of
    XMODEM) 31C3 (CRC catalogues)."""
    crc = start
    for byte in data:
        crc ^= byte << 8
        for _ in range(8):
            crc = (crc << 1 ^ 0x1021) & 0xFFFF if crc & 0x8000 else crc << 1
    return crc


def crc8(data: bytes) -> int:
    """CRC-8 of polynomial 0x07 from 0; check value of "123456789" is F4 (CRC catalogues)."""
    crc = 0
    for byte in data:
        crc ^= byte
        for _ in range(8):
            crc = (crc << 1 ^ 0x07) & 0xFF if crc & 0x80 else crc << 1
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
    "sum16": (lambda data: sum(data) & 0xFFFF, 2),
    "xor": (xor, 1),
    "lrc": (lrc, 1),
    "sum-inverted": (lambda data: ~sum(data) & 0xFF, 1),
    "crc8": (crc8, 1),
    "crc16-modbus": (crc16, 2),
    "crc-ccitt": (crc_ccitt, 2),
    "crc-xmodem": (lambda data: crc_ccitt(data, 0), 2),
}
"""Name -> function and bytes of the result."""

LENGTHS: Mapping[str, int] = {"none": 0, "byte": 1, "hex2": 2, "decimal2": 2, "decimal3": 3, "word": 2, "word-low": 2}
"""Forms of a length field and the bytes that it takes."""


@dataclass(frozen=True, slots=True)
class Frame:
    """``start`` + length + ``address`` + words + ``text_end`` + checksum + ``end``; each of them may be absent.

    ``ends``: any of these ends a frame; with ``keep_end`` it is handed on as the last of the words (prompts that tell a
    state). ``covers`` says what the checksum sees besides length, address and words: nothing ("words"), "start", "end"
    (``text_end``) or "both". ``length_adds``: what the length field counts besides the words. ``size``: words of a
    fixed length.
    """

    start: bytes = b""
    address: bytes = b""
    ends: tuple[bytes, ...] = (b"\r",)
    checksum: str = "none"
    form: str = "hex"
    covers: str = "words"
    text_end: bytes = b""
    keep_end: bool = False
    length: str = "none"
    length_adds: int = 0
    size: int = 0

    def wrap(self, words: str) -> bytes:
        """The bytes of one message."""
        inner = self.address + words.encode("latin-1")
        inner = self._length_field(len(inner)) + inner
        return self.start + inner + self.text_end + self._check(inner) + self.ends[0]

    def find(self, data: bytes) -> tuple[str | None, bytes]:
        """The words of the first good frame and what follows it; ``None`` and what to keep while there is none."""
        address = self.address.decode("latin-1")
        while True:
            counted = self.size or self.length != "none"
            words, data = self._find_counted(data) if counted else self._find_ended(data[-LONGEST:])
            if words is None or words.startswith(address):
                return words if words is None else words[len(address) :], data

    @property
    def check_size(self) -> int:
        """Bytes of the checksum as it is sent."""
        return len(self._check(b""))

    def _find_ended(self, data: bytes) -> tuple[str | None, bytes]:
        """By the end mark. A binary checksum may hold that mark too: then a later one counts."""
        at, binary = 0, self.checksum != "none" and not self.text_end and self.form.endswith("first")
        while True:
            end = self._end_at(data, at)
            if end is None:
                return None, data[at:] if not binary else data
            stop, after, mark = end
            if (words := self._unwrap(data[0 if binary else at : stop])) is not None:
                return words + (mark.decode("latin-1") if self.keep_end else ""), data[after:]
            at = after

    def _end_at(self, data: bytes, at: int) -> tuple[int, int, bytes] | None:
        """(end of words and checksum, begin of the next frame, the mark) from ``at`` on; ``None`` when not yet."""
        if not self.text_end:
            found = [(data.find(end, at), end) for end in self.ends]
            stop, mark = min(((place, end) for place, end in found if place >= 0), default=(-1, b""))
            return None if stop < 0 else (stop, stop + len(mark), mark)
        while (place := data.find(self.text_end, at)) >= 0:
            stop = place + len(self.text_end) + self.check_size
            for end in self.ends:
                if data.startswith(end, stop) and len(data) >= stop + len(end):
                    return stop, stop + len(end), end
            if len(data) < stop + max(map(len, self.ends)):
                return None
            at = place + 1
        return None

    def _unwrap(self, message: bytes) -> str | None:
        """The words of a message without its end; ``None`` for a bent or foreign one. The last start that fits."""
        if not self.start:
            return self._words(message)
        at = len(message)
        for _ in range(STARTS):
            at = message.rfind(self.start, 0, at)
            if at < 0:
                return None
            if (words := self._words(message[at + len(self.start) :])) is not None:
                return words
            at += len(self.start) - 1
        return None

    def _words(self, inner: bytes) -> str | None:
        size = self.check_size
        body, check = (inner[: len(inner) - size], inner[len(inner) - size :]) if size else (inner, b"")
        if self.text_end:
            if not body.endswith(self.text_end):
                return None
            body = body[: len(body) - len(self.text_end)]
        if size and (len(inner) < size or check.upper() != self._check(body).upper()):
            return None
        return body.decode("latin-1")

    def _find_counted(self, data: bytes) -> tuple[str | None, bytes]:
        """By a fixed size or a length field; what does not end as it should is no frame, and the search goes on."""
        head, tail = len(self.start) + LENGTHS[self.length], len(self.text_end) + self.check_size + len(self.ends[0])
        while True:
            at = data.find(self.start)
            if at < 0:
                return None, data[-len(self.start) + 1 :] if len(self.start) > 1 else b""
            data = data[at:]
            if len(data) < head:
                return None, data
            size = self.size or self._counted(data[len(self.start) : head])
            if size is not None and 0 <= size <= LONGEST:
                if len(data) < head + size + tail:
                    return None, data
                inner = data[len(self.start) : head + size]
                if data[head + size : head + size + tail] == self.text_end + self._check(inner) + self.ends[0]:
                    return inner[LENGTHS[self.length] :].decode("latin-1"), data[head + size + tail :]
            data = data[1:]
            if not data:
                return None, b""

    def _check(self, inner: bytes) -> bytes:
        if self.checksum == "none":
            return b""
        function, size = CHECKSUMS[self.checksum]
        before = self.start if self.covers in ("start", "both") else b""
        after = self.text_end if self.covers in ("end", "both") else b""
        number = function(before + inner + after)
        if self.form.startswith("hex"):
            return f"{number:0{2 * size}{'x' if self.form == 'hex-lower' else 'X'}}".encode()
        if self.form == "decimal":
            return f"{number:0{3 if size == 1 else 5}d}".encode()
        return number.to_bytes(size, "little" if self.form == "low-first" else "big")

    def _length_field(self, words: int) -> bytes:
        number, size = words + self.length_adds, LENGTHS[self.length]
        if self.length == "none":
            return b""
        if self.length == "hex2":
            return f"{number:02X}".encode()
        if self.length.startswith("decimal"):
            return f"{number:0{size}d}".encode()
        return number.to_bytes(size, "little" if self.length == "word-low" else "big")

    def _counted(self, field: bytes) -> int | None:
        try:
            if self.length == "hex2":
                return int(field, 16) - self.length_adds
            if self.length.startswith("decimal"):
                return int(field) - self.length_adds
        except ValueError:
            return None
        return int.from_bytes(field, "little" if self.length == "word-low" else "big") - self.length_adds
