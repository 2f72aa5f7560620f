"""Finds the numbers that a nights file varies, and writes rig, chemistry and recipe files with other ones in place."""

from __future__ import annotations

import copy
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from rigd.config.findings import Findings, listed, nearest
from rigd.config.lines import Path as KeyPath
from rigd.config.nights_tables import NightFaultTable, NightsFile, VaryTable
from rigd.config.source import Source, read_source
from rigd.config.structure import read_tables
from rigd.model.errors import ConfigError

FILES = ("rig", "chemistry", "recipe")
WAYS = ("uniform", "normal", "lognormal", "choose")
_STEP = re.compile(r"\.?([A-Za-z0-9_-]+)|\[([^\]]+)\]")
_NUMBER = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*")
Step = str | int


@dataclass(frozen=True, slots=True)
class Varied:
    """One number: where it stands, its unit ("" = a bare number), how it varies (``numbers``: bounds or choices)."""

    what: str
    file: str
    path: tuple[Step, ...]
    unit: str
    way: str
    numbers: tuple[float, ...]
    whole: bool = False

    def written(self, number: float) -> str | float | int:
        """As it stands in a file."""
        if self.unit:
            return f"{number:.9g} {self.unit}"
        return round(number) if self.whole else number


@dataclass(frozen=True, slots=True)
class NightFault:
    """A fault that may come: ``at_s`` and ``size`` are the two ends of an even distribution."""

    kind: str
    target: str
    chance: float
    at_s: tuple[float, float]
    size: tuple[float, float]


@dataclass(frozen=True)
class Nights:
    """A nights file, checked. ``data`` holds the values of the three files by their role."""

    name: str
    rig_path: Path
    recipe_path: Path
    nights: int
    seed: int
    design: str
    varied: tuple[Varied, ...]
    faults: tuple[NightFault, ...]
    data: Mapping[str, Mapping[str, Any]]

    def with_numbers(self, numbers: Sequence[float]) -> dict[str, dict[str, Any]]:
        """The three files with these numbers in place of the varied ones."""
        made = {role: copy.deepcopy(dict(values)) for role, values in self.data.items()}
        for varied, number in zip(self.varied, numbers, strict=True):
            here: Any = made[varied.file]
            for step in varied.path[:-1]:
                here = here[step]
            here[varied.path[-1]] = varied.written(number)
        return made


def read_nights(path: Path) -> Nights:
    """Read a nights file and what it names. Raises ``ConfigError`` with every problem."""
    source, unread = read_source(path)
    found = Findings(source, unread)
    if unread:
        raise ConfigError(found.sorted_by_line)
    if source.data.get("schema") != "rigd-nights-1":
        found.error("file-kind-wrong", ("schema",), "this is not a nights file", 'write schema = "rigd-nights-1"')
        raise ConfigError(found.sorted_by_line)
    file = read_tables(NightsFile, source, found)
    if found.failed:
        raise ConfigError(found.sorted_by_line)
    rig_path, recipe_path = path.parent / file.rig, path.parent / file.recipe
    data = _sources(rig_path, recipe_path, found)
    varied = [_varied(table, data, found) for table in file.vary]
    if file.design == "all combinations":
        _only_choices(file, found)
    if found.failed:
        raise ConfigError(found.sorted_by_line)
    made = tuple(one for one in varied if one is not None)
    faults = tuple(_fault(table) for table in file.faults)
    return Nights(file.name, rig_path, recipe_path, file.nights, file.seed, file.design, made, faults, data)


def _fault(table: NightFaultTable) -> NightFault:
    at, size = sorted(table.at), sorted(table.size)
    return NightFault(table.kind, table.target, table.chance, (at[0], at[1]), (size[0], size[1]))


def _sources(rig_path: Path, recipe_path: Path, found: Findings) -> dict[str, Mapping[str, Any]]:
    data: dict[str, Mapping[str, Any]] = {}
    for role, path in (("rig", rig_path), ("recipe", recipe_path)):
        data[role] = _data_of(path, role, found).data
    chemistry = data["rig"].get("chemistry")
    data["chemistry"] = {}
    if isinstance(chemistry, str):
        data["chemistry"] = _data_of(rig_path.parent / chemistry, "rig", found).data
    return data


def _data_of(path: Path, key: str, found: Findings) -> Source:
    source, unread = read_source(path)
    for problem in unread:
        found.error(problem.code, (key,), f"{path}: {problem.message}", problem.remedy)
    return source


def _only_choices(file: NightsFile, found: Findings) -> None:
    for table in file.vary:
        if table.choose is None:
            message = "all combinations need numbers to choose from"
            found.error("design-wrong", (*table.key_path, "what"), message, "write choose = [ ... ] for each number")


def _varied(table: VaryTable, data: Mapping[str, Mapping[str, Any]], found: Findings) -> Varied | None:
    way = _way(table, found)
    place = _place(table, data, found)
    if way is None or place is None:
        return None
    role, path, value = place
    bounds: tuple[str | float, ...] = getattr(table, way)
    here = (*table.key_path, way)
    parsed = [_parsed(bound) for bound in bounds]
    if any(one is None for one in parsed):
        found.error("quantity-unreadable", here, f"found {list(bounds)}", "write numbers, with their unit in quotes")
        return None
    numbers = tuple(one[0] for one in parsed if one is not None)
    units = [one[1] for one in parsed if one is not None]
    if way == "lognormal" and not units[1]:
        units[1] = units[0]
    if len(set(units)) > 1 or (_text(value) != bool(units[0])):
        message = f"the file has {value!r}; the bounds are {list(bounds)}"
        found.error("unit-wrong", here, message, "write all bounds in one unit, as the file does")
        return None
    if not _in_order(way, numbers):
        message = f"found {list(bounds)}"
        remedy = "uniform: lowest first; normal: standard deviation above 0; lognormal: median above 0, factor above 1"
        found.error("range-empty", here, message, remedy)
        return None
    whole = isinstance(value, int) and not isinstance(value, bool)
    return Varied(table.what, role, path, units[0], way, numbers, whole)


def _text(value: object) -> bool:
    return isinstance(value, str) and bool(_parsed(value) and _parsed(value)[1])  # type: ignore[index]


def _in_order(way: str, numbers: tuple[float, ...]) -> bool:
    if way == "uniform":
        return numbers[0] < numbers[1]
    if way == "normal":
        return numbers[1] > 0
    return way != "lognormal" or (numbers[0] > 0 and numbers[1] > 1)


def _way(table: VaryTable, found: Findings) -> str | None:
    given = [way for way in WAYS if getattr(table, way) is not None]
    if len(given) != 1:
        message = f"found {listed(given)}; exactly one is needed"
        found.error("vary-unclear", (*table.key_path, "what"), message, f"write one of {listed(WAYS)}")
        return None
    return given[0]


def _parsed(bound: str | float) -> tuple[float, str] | None:
    if isinstance(bound, (int, float)):
        return float(bound), ""
    match = _NUMBER.fullmatch(bound)
    return (float(match[1]), match[2]) if match else None


def _place(
    table: VaryTable, data: Mapping[str, Mapping[str, Any]], found: Findings
) -> tuple[str, tuple[Step, ...], object] | None:
    """Role, path and present value of the number that ``what`` names."""
    where: KeyPath = (*table.key_path, "what")
    steps = [match[1] or match[2] for match in _STEP.finditer(table.what)]
    if not steps or steps[0] not in FILES or "".join(_STEP.sub("", table.what)).strip():
        remedy = "write for example rig.columns[COL].packing.voidage"
        message = f"found {table.what!r}; it begins with {listed(FILES)}{nearest(steps[0] if steps else '', FILES)}"
        found.error("path-unknown", where, message, remedy)
        return None
    here: Any = data[steps[0]]
    path: tuple[Step, ...] = ()
    for step in steps[1:]:
        names = _names(here)
        if step not in names:
            known = listed(sorted(str(name) for name in names)[:30])
            message = f"{table.what!r}: nothing is called {step!r} there{nearest(step, [str(n) for n in names])}"
            remedy = f"known there: {known}. A key that the file leaves at its default must be written in it first"
            found.error("path-unknown", where, message, remedy)
            return None
        path = (*path, names[step])
        here = here[names[step]]
    if isinstance(here, (Mapping, list, bool)) or (isinstance(here, str) and _parsed(here) is None):
        remedy = f"name a number in it: {listed(sorted(str(n) for n in _names(here))[:30])}"
        found.error("path-unknown", where, f"{table.what!r} is no number", remedy)
        return None
    return steps[0], path, here


def _names(here: object) -> dict[str, Step]:
    """What can be said next: keys of a table, ids (or numbers from 1) of a list."""
    if isinstance(here, Mapping):
        return {str(key): str(key) for key in here}
    if isinstance(here, list):
        names: dict[str, Step] = {str(i + 1): i for i in range(len(here))}
        for i, item in enumerate(here):
            if isinstance(item, Mapping):
                names |= {str(item[key]): i for key in ("id", "tag", "name") if key in item}
        return names
    return {}


def as_first_written(nights: Nights) -> tuple[float, ...]:
    """The middle of each varied number: what a check before the first night is made with."""
    return tuple(
        varied.numbers[0] if varied.way in ("normal", "lognormal", "choose") else sum(varied.numbers) / 2
        for varied in nights.varied
    )


def shown_with(error: ConfigError, names: Mapping[str, str]) -> ConfigError:
    """An error about written files, with the names of the files that they were made from."""
    problems = [
        replace(problem, file=names.get(Path(problem.file).name, problem.file), line=0) for problem in error.problems
    ]
    return ConfigError(tuple(problems))
