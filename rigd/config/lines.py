"""Where each key of a TOML file stands: key path -> line number.

The standard library's reader gives values but no places. This scanner walks text that the reader has already accepted,
so it only finds places and never judges; a path is a tuple of keys and list indices, ``("pumps", 1, "bore")``.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from contextlib import suppress

Path = tuple[str | int, ...]

_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)+")
_SPACE = re.compile(r"[ \t]*")
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BARE_VALUE = re.compile(r"[^,\]}#\n]+")
_STRINGS = (
    re.compile(r'"""(?:\\.|[^\\])*?"""(?:"{0,2})', re.DOTALL),
    re.compile(r"'''.*?'''(?:'{0,2})", re.DOTALL),
    re.compile(r'"(?:\\.|[^"\\\n])*"'),
    re.compile(r"'[^'\n]*'"),
)


def lines_of(text: str) -> Mapping[Path, int]:
    """Line (from 1) of every table, key and list item of a valid TOML text; what it cannot place is left out."""
    scanner = _Scanner(text)
    with suppress(RecursionError, _LostError):  # a place less in a message is all that is lost
        scanner.document()
    return scanner.found


def line_at(found: Mapping[Path, int], path: Path) -> int:
    """The line of the longest part of ``path`` that is known; 0 when nothing of it is."""
    for length in range(len(path), 0, -1):
        if path[:length] in found:
            return found[path[:length]]
    return 0


class _LostError(Exception):
    """The text is not what the scanner expects here."""


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text.replace("\r\n", "\n")
        self.pos = 0
        self.found: dict[Path, int] = {}
        self._counts: dict[Path, int] = {}
        self._counted_to = 0
        self._line = 1

    def document(self) -> None:
        table: Path = ()
        while self._skip(_BLANK) < len(self.text):
            if self.text.startswith("[", self.pos):
                table = self._header()
            else:
                self._pair(table)

    def _header(self) -> Path:
        line, many = self._line_here(), self.text.startswith("[[", self.pos)
        self.pos += 2 if many else 1
        path = self._resolve(self._key(), line)
        self.found.setdefault(path, line)
        if many:
            index = self._counts.get(path, 0)
            self._counts[path] = index + 1
            path = (*path, index)
            self.found[path] = line
        self._expect("]]" if many else "]")
        return path

    def _resolve(self, keys: tuple[str, ...], line: int) -> Path:
        """Step into the last item of each list of tables on the way; a table that is only implied begins here."""
        path: Path = ()
        for key in keys[:-1]:
            path = (*path, key)
            self.found.setdefault(path, line)
            if path in self._counts:
                path = (*path, self._counts[path] - 1)
        return (*path, keys[-1])

    def _pair(self, table: Path) -> None:
        line = self._line_here()
        path = table
        for key in self._key():
            path = (*path, key)
            self.found.setdefault(path, line)
        self._expect("=")
        self._skip(_SPACE)
        self._value(path)

    def _key(self) -> tuple[str, ...]:
        keys = [self._one_key()]
        while self._skip(_SPACE) < len(self.text) and self.text[self.pos] == ".":
            self.pos += 1
            keys.append(self._one_key())
        return tuple(keys)

    def _one_key(self) -> str:
        self._skip(_SPACE)
        if (bare := _BARE_KEY.match(self.text, self.pos)) is not None:
            self.pos = bare.end()
            return bare[0]
        return _unquoted(self._string())

    def _value(self, path: Path) -> None:
        first = self.text[self.pos : self.pos + 1]
        if first == "[":
            self._list(path)
        elif first == "{":
            self._inline_table(path)
        elif first in ('"', "'"):
            self._string()
        else:
            self._skip(_BARE_VALUE)

    def _list(self, path: Path) -> None:
        self.pos += 1
        index = 0
        while not self._closed("]"):
            self.found[(*path, index)] = self._line_here()
            self._value((*path, index))
            self._skip(_BLANK)
            index += 1

    def _inline_table(self, path: Path) -> None:
        self.pos += 1
        while not self._closed("}"):
            self._pair(path)
            self._skip(_BLANK)

    def _closed(self, bracket: str) -> bool:
        """Step over a comma; True (and past it) at the closing bracket."""
        self._skip(_BLANK)
        if self.text.startswith(",", self.pos):
            self.pos += 1
            self._skip(_BLANK)
        if self.pos >= len(self.text):
            raise _LostError
        if self.text.startswith(bracket, self.pos):
            self.pos += 1
            return True
        return False

    def _string(self) -> str:
        for pattern in _STRINGS:
            if (match := pattern.match(self.text, self.pos)) is not None:
                self.pos = match.end()
                return match[0]
        raise _LostError

    def _expect(self, token: str) -> None:
        self._skip(_SPACE)
        if not self.text.startswith(token, self.pos):
            raise _LostError
        self.pos += len(token)

    def _skip(self, pattern: re.Pattern[str]) -> int:
        if (match := pattern.match(self.text, self.pos)) is not None:
            self.pos = match.end()
        return self.pos

    def _line_here(self) -> int:
        self._line += self.text.count("\n", self._counted_to, self.pos)
        self._counted_to = self.pos
        return self._line


_ESCAPES = {"b": "\b", "t": "\t", "n": "\n", "f": "\f", "r": "\r"}
_ESCAPE = re.compile(r"\\(?:u([0-9A-Fa-f]{4})|U([0-9A-Fa-f]{8})|(.))")


def _unquoted(quoted: str) -> str:
    """The key that a quoted key means."""
    if quoted.startswith("'"):
        return quoted[1:-1]
    return _ESCAPE.sub(lambda m: chr(int(m[1] or m[2], 16)) if m[1] or m[2] else _ESCAPES.get(m[3], m[3]), quoted[1:-1])
