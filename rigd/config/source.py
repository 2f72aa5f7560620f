"""Reads a TOML file: its text, its values, and a finding instead of an exception when that fails."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path as FilePath

from rigd.config.lines import Path, lines_of
from rigd.model.problems import Problem

LARGEST_BYTES = 2_000_000
"""A rig or recipe is a few kilobytes; anything larger was not written by a person and is refused unread."""

_PLACE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)")


@dataclass(frozen=True)
class Source:
    """One file as read: ``name`` as the person gave it, its values, and the places of its keys when asked for."""

    name: str
    text: str = ""
    data: Mapping[str, object] = field(default_factory=dict)

    @cached_property
    def lines(self) -> Mapping[Path, int]:
        """Line of each key path; worked out at the first finding, not before."""
        return lines_of(self.text)

    def value_at(self, path: Path) -> object:
        """What stands at a path, ``None`` when nothing does."""
        here: object = self.data
        for step in path:
            if (isinstance(here, Mapping) and step in here) or (
                isinstance(here, list) and isinstance(step, int) and step < len(here)
            ):
                here = here[step]  # type: ignore[index]
            else:
                return None
        return here


def read_source(path: FilePath) -> tuple[Source, tuple[Problem, ...]]:
    """Read and parse a file. With problems, the source is empty (but named)."""
    name = str(path)
    try:
        with path.open("rb") as file:
            raw = file.read(LARGEST_BYTES + 1)
    except (OSError, ValueError) as error:
        return Source(name), (_unreadable(name, error),)
    if len(raw) > LARGEST_BYTES:
        message = f"the file is larger than {LARGEST_BYTES} bytes"
        return Source(name), (Problem("file-too-large", message, "give a rig or recipe file in TOML", file=name),)
    return parse_source(name, raw)


def parse_source(name: str, raw: bytes) -> tuple[Source, tuple[Problem, ...]]:
    """Parse the bytes of a file; see ``read_source``."""
    try:
        text = raw.decode("utf-8")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        message = f"byte {raw[error.start]:#04x} is not UTF-8 text"
        remedy = "save the file as UTF-8 (write 'degC' and 'uL', not a degree or micro sign)"
        return Source(name), (Problem("encoding-wrong", message, remedy, file=name, line=line),)
    try:
        return Source(name, text, tomllib.loads(text)), ()
    except RecursionError:
        problem = Problem("syntax-wrong", "brackets are nested too deeply", "write it flat", file=name)
    except ValueError as error:  # TOMLDecodeError, and numbers or dates that Python cannot hold
        problem = _syntax_problem(name, text, str(error))
    return Source(name), (problem,)


def _unreadable(name: str, error: Exception) -> Problem:
    if isinstance(error, FileNotFoundError):
        return Problem("file-missing", "there is no such file", "check the path and its spelling", file=name)
    if isinstance(error, IsADirectoryError):
        return Problem("file-unreadable", "this is a folder, not a file", "name a .toml file in it", file=name)
    reason = getattr(error, "strerror", None) or str(error)
    return Problem("file-unreadable", f"the file cannot be read: {reason}", "check its permissions", file=name)


def _syntax_problem(name: str, text: str, words: str) -> Problem:
    place = _PLACE.search(words)
    line = 0
    if place is not None:
        line = int(place[1]) if place[1] else text.rstrip().count("\n") + 1
    message = f"not valid TOML: {_PLACE.sub('', words)}"
    if text.startswith("\ufeff"):
        message += " (the file begins with a byte-order mark)"
    column = f" near column {place[2]}" if place is not None and place[2] else ""
    remedy = f"look{column} for a missing quote, bracket or equals sign; text and quantities stand in double quotes"
    return Problem("syntax-wrong", message, remedy, file=name, line=line)
