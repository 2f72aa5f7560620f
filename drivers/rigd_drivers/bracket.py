"""The bracket protocol, as bytes (manual, section 1). Pure.

    request   {AASS word word ...}CCCC LF
    reply     (AASS kind word ...)CCCC LF

One master; a device speaks only when asked. The reader must survive: noise before, between and after replies; a reply
torn by a lost byte; the echo of our own request; replies of other addresses; late replies to earlier requests. Only a
frame with the right checksum, address *and* number is an answer; everything else is skipped.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from typing import Generic, TypeVar

from rigd.model.errors import DeviceProtocolError, DeviceRefused, LocalProtocolError
from rigd_drivers.checksums import crc16

T = TypeVar("T")

REQUEST_MAX = 120
REPLY_MAX = 4096
OWN_NUMBERS = 0xF0
"""Drivers count 00 to EF. F0 to FF belong to last wills: a stop must never look like our last request repeated."""

_WORD = re.compile(r"[!-'*-z|~]+")  # printable ASCII without blank, ( ) { }
_REPLY = re.compile(rb"\((\d\d)([0-9A-F]{2}) ([ -'*-z|~]+)\)([0-9A-F]{4})\r?")
_NUMBER = re.compile(r"-?[0-9]{1,9}(?:\.[0-9]{1,9})?")

Words = Sequence[str]


class DeviceBusy(DeviceRefused):
    """The device answered ``busy``: try later, with a new number."""


def encode_request(address: int, number: int, words: Words) -> bytes:
    """The frame of a request, ``LocalProtocolError`` for one that the manual does not allow.

    >>> encode_request(11, 1, ("who?",))
    b'{1101 who?}BAAC\\n'
    """
    if not (0 <= address <= 99 and 0 <= number <= 0xFF and words and all(_WORD.fullmatch(word) for word in words)):
        raise LocalProtocolError(f"{words!r} cannot be sent to address {address} under number {number}")
    body = f"{{{address:02d}{number:02X} {' '.join(words)}}}".encode("ascii")
    frame = body + b"%04X\n" % crc16(body)
    if len(frame) > REQUEST_MAX:
        raise LocalProtocolError(f"a request of {len(frame)} bytes is too long; {REQUEST_MAX} are allowed")
    return frame


def exact_reply(address: int, number: int, text: str) -> bytes:
    """The pattern (bytes regular expression) that only this reply, checksum included, matches."""
    body = f"({address:02d}{number:02X} {text})".encode("ascii")
    return re.escape(body) + rb"%04X\r?\n" % crc16(body)


def ok_reply(address: int, number: int, words: bytes = b"") -> bytes:
    """The pattern of an ``ok`` that begins with ``words`` (a pattern); its checksum is only known to be there."""
    return rb"\(%02d%02X ok %s[ -'*-z|~]*\)[0-9A-F]{4}\r?\n" % (address, number, words)


class BracketReader(Generic[T]):
    """Finds the reply to one request. ``decode`` turns the words after ``ok`` into the answer or raises ``ValueError``.

    See ``rigd.ports.link.ReplyReader`` for what ``feed`` raises.
    """

    numbered = True

    def __init__(self, address: int, number: int, asked: Words, decode: Callable[[Words], T]) -> None:
        self._address = b"%02d" % address
        self._number = b"%02X" % number
        self._asked = " ".join(asked)
        self._decode = decode
        self._kept = b""

    def feed(self, data: bytes) -> T | None:
        """Take the next bytes; see ``rigd.ports.link.ReplyReader``."""
        *lines, rest = (self._kept + data).split(b"\n")
        self._kept = rest[-REPLY_MAX:]
        for line in lines:
            text = self._reply_text(line)
            if text is not None:
                return self._answer(text)
        return None

    def _reply_text(self, line: bytes) -> str | None:
        start = line.rfind(b"(")
        frame = _REPLY.fullmatch(line, start) if start >= 0 and len(line) - start < REPLY_MAX else None
        if frame is None or frame[1] != self._address or frame[2] != self._number:
            return None
        if int(frame[4], 16) != crc16(line[start : frame.end(3) + 1]):
            return None
        return frame[3].decode("ascii")

    def _answer(self, text: str) -> T:
        kind, *words = text.split(" ")
        if kind == "ok":
            try:
                return self._decode(words)
            except ValueError as error:
                raise DeviceProtocolError(
                    f"answer {text!r} to {self._asked!r} is against the manual: {error}"
                ) from error
        if kind == "no" and words and words[0]:
            raise DeviceRefused(f"refused {self._asked!r}: {' '.join(words)}")
        if kind == "busy":
            raise DeviceBusy(f"refused {self._asked!r}: busy")
        raise DeviceProtocolError(f"answer {text!r} to {self._asked!r} is against the manual")


def done(words: Words) -> bool:
    """Decodes an ``ok`` without more words; anything else is not an answer to an order."""
    if words:
        raise ValueError("no words belong here")
    return True


def number(text: str) -> float:
    """A decimal number as the manual writes it: no exponent, no plus, no infinity."""
    if _NUMBER.fullmatch(text) is None:
        raise ValueError(f"{text!r} is not a number")
    return float(text)


def whole(text: str) -> int:
    """A whole number without a sign."""
    if re.fullmatch(r"[0-9]{1,9}", text) is None:
        raise ValueError(f"{text!r} is not a whole number")
    return int(text)


def named(words: Words, *names: str) -> list[str]:
    """The values of ``name=value`` words that must be exactly these, in this order."""
    pairs = [word.partition("=") for word in words]
    if [name for name, _, _ in pairs] != list(names) or not all(value for _, _, value in pairs):
        raise ValueError(f"{', '.join(names)} are needed")
    return [value for _, _, value in pairs]


def bit(text: str) -> bool:
    """``0`` or ``1``."""
    if text not in ("0", "1"):
        raise ValueError(f"{text!r} is neither 0 nor 1")
    return text == "1"
