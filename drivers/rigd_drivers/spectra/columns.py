"""A spectrum as columns of text (CSV), by a column map. Pure."""

from __future__ import annotations

import re
from dataclasses import dataclass

from rigd_drivers.spectra.wire import Curve, curve


@dataclass(frozen=True, slots=True)
class Columns:
    """``x`` and ``y``: the heading of a column, or its place counted from 1. ``unit`` of the ordinate. ``rows`` is how
    many there must be, 0 for any. ``comma``: numbers are written with a decimal comma."""

    x: str = "1"
    y: str = "2"
    unit: str = "absorbance"
    rows: int = 0
    comma: bool = False


def read(text: str, map_: Columns) -> Curve:
    """The spectrum; rows before the first one of numbers are headings. ``ValueError`` says what does not fit."""
    if not text.endswith("\n"):
        raise ValueError("its last line has no end: it is not whole")
    lines = [_cells(line, map_.comma) for line in text.splitlines() if line.strip() and not line.startswith("#")]
    places, start = _places(lines, map_)
    wavenumbers, ordinates = [], []
    for cells in lines[start:]:
        if len(cells) <= max(places):
            raise ValueError(f"a row has {len(cells)} columns only: {cells[:4]}")
        wavenumbers.append(_number(cells[places[0]], map_.comma))
        ordinates.append(_number(cells[places[1]], map_.comma))
    if map_.rows and len(wavenumbers) != map_.rows:
        raise ValueError(f"it has {len(wavenumbers)} rows, {map_.rows} are declared")
    return curve(wavenumbers, ordinates, map_.unit)


def _cells(line: str, comma: bool) -> list[str]:
    separator = next((mark for mark in (";", "\t", "" if comma else ",") if mark and mark in line), None)
    return [cell.strip().strip('"') for cell in line.split(separator)]


def _places(lines: list[list[str]], map_: Columns) -> tuple[tuple[int, int], int]:
    """(indices of the two columns, first row of numbers)."""
    names = (map_.x, map_.y)
    if all(name.isdigit() for name in names):
        places = (int(map_.x) - 1, int(map_.y) - 1)
        for number, cells in enumerate(lines):
            if len(cells) > max(places) and all(_is_number(cells[place], map_.comma) for place in places):
                return places, number
        raise ValueError("there is no row of numbers")
    for number, cells in enumerate(lines):
        if all(name in cells for name in names):
            return (cells.index(map_.x), cells.index(map_.y)), number + 1
    raise ValueError(f"no row has the headings {map_.x!r} and {map_.y!r}")


def _is_number(cell: str, comma: bool) -> bool:
    return re.fullmatch(r"[+-]?(\d+\.?\d*|\.\d+)([Ee][+-]?\d+)?", cell.replace(",", ".") if comma else cell) is not None


def _number(cell: str, comma: bool) -> float:
    if not _is_number(cell, comma):
        raise ValueError(f"{cell[:20]!r} is no number")
    return float(cell.replace(",", ".") if comma else cell)
