"""Words of text protocols: commands with values filled in, patterns of replies, and the reader of one reply. Pure."""

from __future__ import annotations

import re
import struct
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from rigd.model.errors import DeviceRefused, LocalProtocolError
from rigd_drivers.card.expressions import Expression, Value, number, parse
from rigd_drivers.card.frames import Frame

KEPT = 64
_SLOT = re.compile(r"\{\{|\}\}|\{([^{}:]*[A-Za-z_][^{}:]*)(?::([^{}]*))?\}")
_FORM = re.compile(r"[-+ ]?#?0?\d{0,3}(?:\.\d{1,2})?[defgxXcbos]?|[<>][bBhHiIqQfd]")


def slots(template: str) -> list[tuple[Expression, str]]:
    """What a template asks for: (expression, format) of each ``{...}``; ``ExpressionError`` or ``ValueError``."""
    found = []
    for slot in _SLOT.finditer(template):
        if slot[1] is None:
            continue
        if _FORM.fullmatch(slot[2] or "") is None:
            raise ValueError(f"format {slot[2]!r} is unknown; such as .3f, 05d, +.2f, 04X, c, s or >H (bytes)")
        found.append((parse(slot[1]), slot[2] or ""))
    return found


def fill(template: str, known: Mapping[str, Value], decimal: str = ".") -> str:
    """A command with its ``{value:.3f}``, ``{address}``, ``{round(value * 60):05d}`` filled in; ``{{`` is a brace."""

    def one(slot: re.Match[str]) -> str:
        if slot[1] is None:
            return slot[0][0]
        expression = parse(slot[1])
        missing = expression.names - known.keys()
        if missing:
            raise LocalProtocolError(f"{template!r} needs {', '.join(sorted(missing))}")
        return _formed(expression(known), slot[2] or "", decimal)

    return _SLOT.sub(one, template)


def _formed(value: Value, form: str, decimal: str) -> str:
    try:
        if isinstance(value, str) and form in ("", "s"):
            return value
        if form[:1] in ("<", ">") and form[-1:] in tuple("bBhHiIqQfd"):
            found = number(value)
            return struct.pack(form, found if form[-1] in "fd" else round(found)).decode("latin-1")
        if form[-1:] in tuple("dxXcbo"):
            return format(round(number(value)), form)
        return format(number(value), form or ".10g").replace(".", decimal)
    except (ValueError, OverflowError, struct.error) as error:
        raise LocalProtocolError(f"{value!r} does not fit the format {form!r}: {error}") from None


def fill_pattern(pattern: str, known: Mapping[str, Value]) -> str:
    """A reply pattern with ``{address}`` and the like filled in literally; repetitions ``{3}`` stay."""

    def one(slot: re.Match[str]) -> str:
        if slot[1] is None:
            return slot[0]
        return re.escape(_formed(parse(slot[1])(known), slot[2] or "", "."))

    return _SLOT.sub(one, pattern)


@dataclass(frozen=True, slots=True)
class Expected:
    """What counts as the reply: its pattern over ``lines`` frames, or over all frames up to one that matches ``last``.

    ``errors`` are patterns of the device's "no" with their meaning; without a pattern nothing is waited for.
    """

    pattern: str
    errors: Mapping[str, str]
    lines: int = 1
    last: str = ""


class TextReader:
    """Finds the reply to one request: the first good frame (or frames) that the pattern matches wholly."""

    def __init__(self, frame: Frame, expected: Expected, *, echo: bytes = b"", numbered: bool = False) -> None:
        self.numbered = numbered
        self.unknown = ""
        self._frame, self._expected, self._echo = frame, expected, echo
        self._pattern = re.compile(expected.pattern)
        self._kept = b""
        self._lines: list[str] = []

    def feed(self, data: bytes) -> Mapping[str, str] | None:
        """Take the next bytes; the fields of the reply or ``None``."""
        self._kept += data
        if self._echo:
            at = self._kept.find(self._echo)
            if at < 0:
                self._kept = self._kept[-4096:]
                return None
            self._kept, self._echo = self._kept[at + len(self._echo) :], b""
        if not self._expected.pattern:
            return {}
        while True:
            words, self._kept = self._frame.find(self._kept)
            if words is None:
                return None
            if (found := self._line(words)) is not None:
                return found

    def _line(self, words: str) -> Mapping[str, str] | None:
        """One more frame; a single one that is an error reply is the device's "no"."""
        self._lines = [*self._lines[1 - KEPT :], words]
        expected, count = self._expected, len(self._lines)
        starts: Sequence[int] = (count - expected.lines,) if count >= expected.lines else ()
        if expected.last:
            starts = range(count) if re.fullmatch(expected.last, words.strip()) else ()
        for start in starts:
            if (found := self._matched("\n".join(self._lines[start:]))) is not None:
                return found
        self._refused(words)
        return None

    def _matched(self, text: str) -> Mapping[str, str] | None:
        found = self._pattern.fullmatch(text) or self._pattern.fullmatch(text.strip())
        return None if found is None else {name: value or "" for name, value in found.groupdict().items()}

    def _refused(self, words: str) -> None:
        for pattern, meaning in self._expected.errors.items():
            if (found := re.fullmatch(pattern, words.strip())) is not None:
                fields = ", ".join(value for value in found.groupdict().values() if value)
                raise DeviceRefused(f"refused: {meaning or words.strip()}{f' ({fields})' if fields else ''}")
        if words.strip():
            self.unknown = words.strip()
