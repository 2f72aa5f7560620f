"""Reading of a card file, with errors that name file, line, key, what is allowed and the nearest known key."""

from __future__ import annotations

import re
import tomllib
import types
from collections.abc import Iterator
from difflib import get_close_matches
from functools import partial
from pathlib import Path
from typing import Any, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError

from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd_drivers.card.model import Card
from rigd_drivers.card.rules import findings


def load_card(path: Path) -> Card:
    """The card in a file; ``ConfigError`` with one problem for each mistake."""
    try:
        text = path.read_text(encoding="utf-8")
        tables = tomllib.loads(text)
    except (OSError, UnicodeDecodeError) as error:
        problem = Problem("file-unreadable", f"cannot be read: {error}", "name a card file", file=str(path))
        raise ConfigError((problem,)) from None
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"line (\d+)", str(error))
        line, remedy = int(found[1]) if found else 0, "correct the TOML at this line; patterns stand in 'single quotes'"
        raise ConfigError((Problem("toml-wrong", str(error), remedy, file=str(path), line=line),)) from None
    try:
        card = Card.model_validate(tables)
    except ValidationError as error:
        raise ConfigError(tuple(_problems(path, text, error))) from None
    wrong = findings(card)
    if wrong:
        raise ConfigError(
            tuple(
                Problem("card-wrong", message, remedy, file=str(path), line=line_of(text, key), key=key)
                for key, message, remedy in wrong
            )
        )
    return card


def line_of(text: str, key: str) -> int:
    """The line where a dotted key stands, or the nearest table above it; 0 when it is nowhere.

    Numbers in the key count the tables of an array, or the steps of an order that stand one to a line.
    """
    parts = [part.strip('"') for part in re.findall(r'"[^"]*"|[^.]+', key)]
    lines = text.splitlines()
    at, size = -1, 0
    for length in range(len(parts), 0, -1):
        if (place := _heading(lines, parts[:length])) is not None:
            at, size = place, length
            break
    first = at + 1
    for part in parts[size:]:
        found = _inside(lines, first, part)
        if found is not None:
            at = first = found
    return at + 1


def _heading(lines: list[str], parts: list[str]) -> int | None:
    """The index of the line that opens a table; a trailing number picks one of an array of tables."""
    number = int(parts[-1]) if parts[-1].isdigit() else 0
    name = [part for part in parts if not part.isdigit()]
    places = []
    for at, line in enumerate(lines):
        found = re.fullmatch(r"\s*\[{1,2}(.+?)\]{1,2}\s*(?:#.*)?", line)
        if found and [one.strip(' "') for one in re.findall(r'"[^"]*"|[^.]+', found[1])] == name:
            places.append(at)
    return places[min(number, len(places) - 1)] if places else None


def _inside(lines: list[str], first: int, part: str) -> int | None:
    """The line from ``first`` on, within the same table, that says a key or is the so-and-so-many-th step."""
    stop = next((n for n in range(max(first, 0), len(lines)) if re.match(r"\s*\[{1,2}[^{\[]*\]", lines[n])), len(lines))
    block = range(first, max(stop, first + 1))
    if part.isdigit():
        steps = [n for n in block if n < len(lines) and re.match(r"\s*\{", lines[n])]
        return steps[int(part)] if int(part) < len(steps) else None
    return next((n for n in block if n < len(lines) and _says(lines[n], part)), None)


def _says(line: str, part: str) -> bool:
    return re.search(rf"""(?:^\s*|[{{,]\s*|\.)["']?{re.escape(part.strip('"'))}["']?\s*[=.]""", line) is not None


def _problems(path: Path, text: str, error: ValidationError) -> Iterator[Problem]:
    seen = set()
    for item in error.errors():
        key = ".".join(str(part) for part in item["loc"] if not str(part).startswith(("function-", "literal[")))
        key = re.sub(r"\.(?:float|str|list\[\w+\])$", "", key)
        if key not in seen:
            seen.add(key)
            yield _problem(path, text, key, dict(item))


def _problem(path: Path, text: str, key: str, item: dict[str, Any]) -> Problem:
    told = partial(Problem, file=str(path), line=line_of(text, key), key=key)
    last = key.rpartition(".")[2]
    if item["type"] == "missing":
        return told("key-missing", f"{key} is missing", "add it; see `rigd card new`")
    if item["type"] == "extra_forbidden":
        known = _known(item["loc"])
        near = get_close_matches(last, known, n=1, cutoff=0.5)
        hint = f"did you mean {near[0]!r}? " if near else ""
        return told("key-unknown", f"unknown key {last!r}", f"{hint}known here: {', '.join(known)}")
    message = str(item["msg"]).removeprefix("Value error, ")
    near = get_close_matches(str(item["input"]), re.findall(r"'([^']+)'", str(item.get("ctx", ""))), n=1, cutoff=0.4)
    remedy = f"did you mean {near[0]!r}?" if near else "write what is allowed; drivers/README.md explains each key"
    return told("value-wrong", f"{message}; found {item['input']!r}", remedy)


def _known(place: tuple[Any, ...]) -> list[str]:
    """The keys that the table around an unknown key may have."""
    table: Any = Card
    for part in place[:-1]:
        fields = {field.alias or name: field.annotation for name, field in table.model_fields.items()}
        if part in fields:
            table = _model_in(fields[part]) or table
    return [field.alias or name for name, field in table.model_fields.items()]


def _model_in(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    if get_origin(annotation) in (list, dict, Union, types.UnionType):
        return next((one for arg in get_args(annotation) if (one := _model_in(arg)) is not None), None)
    return None
