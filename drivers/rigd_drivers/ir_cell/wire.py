"""Words of the IR flow cell (manual, 1.4). Pure. Wavenumbers in 1/cm; absorbance in tenths of a thousandth."""

from __future__ import annotations

import re
import struct
from dataclasses import dataclass

from rigd_drivers.bracket import REPLY_MAX, Words, named, number, whole

MODEL = "FC1"
GRID, COUNT, SPECTRUM = ("grid?",), ("count?",), ("spectrum?",)
POINTS_MAX = REPLY_MAX // 4


@dataclass(frozen=True, slots=True)
class Grid:
    """Points, first wavenumber and step [1/cm], acquisition time [s]."""

    points: int
    start_per_cm: float
    step_per_cm: float
    every_s: float


@dataclass(frozen=True, slots=True)
class Finished:
    """The last finished spectrum, its running number, and how long ago it was finished [s]."""

    count: int
    age_s: float
    absorbance: tuple[float, ...]


NONE_YET = Finished(0, 0.0, ())


def grid(words: Words) -> Grid:
    """``n=236 from=860.0 step=4.0 every=5.0``"""
    points, start, step, every = named(words, "n", "from", "step", "every")
    found = Grid(whole(points), number(start), number(step), number(every))
    if not (0 < found.points <= POINTS_MAX and found.step_per_cm > 0):
        raise ValueError("that is no grid")
    return found


def count(words: Words) -> int:
    """``count=17``"""
    (finished,) = named(words, "count")
    return whole(finished)


def spectrum(words: Words, points: int) -> Finished:
    """``count=17 age=1.2 data=000F0013...``: four digits a point, two's complement, 1e-4 absorbance."""
    finished, age, data = named(words, "count", "age", "data")
    if re.fullmatch(r"(?:[0-9A-F]{4})+", data) is None or len(data) != 4 * points:
        raise ValueError(f"{len(data)} digits of data, {4 * points} are needed")
    codes = struct.unpack(f">{points}h", bytes.fromhex(data))
    return Finished(whole(finished), number(age), tuple(code * 1e-4 for code in codes))
