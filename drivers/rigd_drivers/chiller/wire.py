"""The plain protocol of the chiller (manual, 2). Pure.

    request   words CR
    reply     one line CR LF

No address, no checksum, no number. The readers skip every line that cannot be the answer (a torn line, a late reply to
another question). What they cannot see is a digit that was lost on the way; the driver asks twice when a value jumps.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Generic, TypeVar

from rigd.model.devices import DeviceIdentity, WillFrame
from rigd.model.errors import DeviceRefused, LocalProtocolError

T = TypeVar("T")

MODEL = "CB-1"
MAKER = "bench"
LINE_MAX = 80

_BATH = re.compile(r"BATH (-?\d{1,3}\.\d\d)")
_SET = re.compile(r"SET (-?\d{1,3}\.\d)")
_RUN = re.compile(r"RUN ([01])")
_STATUS = re.compile(r"STATUS ([01])([01])([01])")
_IDENTITY = re.compile(r"(?!(?:OK|ERR|SET|BATH|RUN|STATUS)\b)([!-~]+) ([!-~]+) ([!-~]+)( SIMULATED)?")
_REFUSED = re.compile(r"ERR ([A-Z]+)")


@dataclass(frozen=True, slots=True)
class Status:
    """Restarted since ``CLEAR``; low level; fault."""

    restarted: bool
    low_level: bool
    fault: bool

    @property
    def trouble(self) -> str:
        """What is wrong, or ""."""
        return "low level" if self.low_level else "the chiller reports a fault" if self.fault else ""


class LineReader(Generic[T]):
    """Finds the reply to one request: the first line that ``decode`` knows. ``ERR`` raises ``DeviceRefused``."""

    def __init__(self, asked: str, decode: Callable[[str], T | None]) -> None:
        self._asked = asked
        self._decode = decode
        self._kept = b""

    def feed(self, data: bytes) -> T | None:
        """Take the next bytes; see ``rigd.ports.link.ReplyReader``."""
        *lines, rest = (self._kept + data).split(b"\r\n")
        self._kept = rest[-LINE_MAX:]
        for line in lines:
            text = line.decode("ascii", "replace")
            if (refused := _REFUSED.fullmatch(text)) is not None:
                raise DeviceRefused(f"refused {self._asked!r}: {refused[1]}")
            answer = self._decode(text)
            if answer is not None:
                return answer
        return None


def encode(words: str) -> bytes:
    """The bytes of a request."""
    return words.encode("ascii") + b"\r"


def identity(line: str) -> DeviceIdentity | None:
    """``CB-1 serial firmware [SIMULATED]``"""
    found = _IDENTITY.fullmatch(line)
    return None if found is None else DeviceIdentity(MAKER, found[1], found[2], found[3], bool(found[4]))


def bath(line: str) -> float | None:
    """``BATH 59.98`` [degC]"""
    found = _BATH.fullmatch(line)
    return None if found is None else float(found[1])


def setpoint(line: str) -> float | None:
    """``SET 60.0`` [degC]"""
    found = _SET.fullmatch(line)
    return None if found is None else float(found[1])


def running(line: str) -> float | None:
    """``RUN 1``"""
    found = _RUN.fullmatch(line)
    return None if found is None else float(found[1])


def status(line: str) -> Status | None:
    """``STATUS abc``"""
    found = _STATUS.fullmatch(line)
    return None if found is None else Status(*(digit == "1" for digit in found.groups()))


def accepted(line: str) -> bool | None:
    """``OK``: it cannot say to what, so what was set must be read back."""
    return True if line == "OK" else None


def set_words(value_degC: float) -> str:
    """A set-point to a tenth of a degree; ``LocalProtocolError`` for what is not a temperature."""
    if not (math.isfinite(value_degC) and -273.15 <= value_degC < 1000):
        raise LocalProtocolError(f"{value_degC:g} degC is not a temperature")
    return f"SET {round(value_degC, 1) + 0.0:.1f}"


def run_words(value: float) -> str:
    """Circulation and thermostat on (1) or off (0)."""
    if value not in (0, 1):
        raise LocalProtocolError(f"circulation is 1 (on) or 0 (off), not {value:g}")
    return f"RUN {int(value)}"


def off_frames(timeout_s: float) -> tuple[tuple[WillFrame, ...], tuple[WillFrame, ...]]:
    """(switch off, check)"""
    off = WillFrame(encode("RUN 0"), rb"OK\r\n", timeout_s)
    return (off,), (WillFrame(encode("RUN"), rb"RUN 0\r\n", timeout_s),)
