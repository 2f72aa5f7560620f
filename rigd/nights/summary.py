"""What the rows of a campaign say together: the chance to finish, the spread of each result, what matters most."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from rigd.analysis.influence import Chance, Influence, Spread, chance, influences, spread, variance_shares
from rigd.nights.night import Row

RESULTS = (
    ("duration_s", "duration", "s"), ("peak.", "peak of", ""), ("left_mL.", "left of", "mL"),
    ("conversion.", "conversion at", "%"), ("settle_s.", "steady after, at", "s"),
)  # fmt: skip
"""Which columns are results, and how they are said: beginning, words, unit ("" = the tag's own)."""
VARY = "vary."


@dataclass(frozen=True, slots=True)
class Result:
    """One result of a campaign: its column, words and unit, its spread, and what goes with it (strongest first)."""

    column: str
    words: str
    unit: str
    spread: Spread
    influences: tuple[Influence, ...]


@dataclass(frozen=True, slots=True)
class Campaign:
    """A campaign as told: nights ``planned`` and done, how they ended, first-outs, results, wall time of a night."""

    name: str
    design: str
    planned: int
    nights: int
    finishes: Chance | None
    outcomes: tuple[tuple[str, int], ...]
    first_outs: tuple[tuple[str, int], ...]
    refusals: tuple[tuple[str, int], ...]
    results: tuple[Result, ...]
    varied: tuple[str, ...]
    wall_s: float


def finished(row: Row) -> bool:
    """Done, and every point collected."""
    return bool(row["outcome"] == "done" and row.get("collected") == row.get("points"))


def summarise(name: str, design: str, planned: int, rows: Sequence[Row], units: dict[str, str]) -> Campaign:
    """Sum up. ``units`` are those of tags, for peaks."""
    varied = tuple(dict.fromkeys(key[len(VARY) :] for row in rows for key in row if key.startswith(VARY)))
    numbers = np.array([[row.get(VARY + what, math.nan) for what in varied] for row in rows], dtype=float)
    whole = design == "sobol" and len(rows) == planned
    results = []
    for column in _result_columns(rows):
        values = np.array([_number(row.get(column)) for row in rows])
        seen = spread(values.tolist())
        if seen is not None and seen.high > seen.low:
            found = variance_shares(varied, values) if whole else influences(varied, numbers, values)
            results.append(Result(column, *_words(column, units), seen, tuple(found)))
    wall = [float(row["wall_s"]) for row in rows if "wall_s" in row]
    return Campaign(
        name=name,
        design=design,
        planned=planned,
        nights=len(rows),
        finishes=chance(sum(map(finished, rows)), len(rows)) if rows else None,
        outcomes=_counted(str(row["outcome"]) for row in rows),
        first_outs=_counted(str(row["first_out"]) for row in rows if row.get("first_out")),
        refusals=_counted(str(row["text"]) for row in rows if row["outcome"] == "refused"),
        results=tuple(results),
        varied=varied,
        wall_s=sum(wall) / len(wall) if wall else math.nan,
    )


def _result_columns(rows: Sequence[Row]) -> list[str]:
    names = list(dict.fromkeys(key for row in rows for key in row))
    return [name for start, _, _ in RESULTS for name in names if name.startswith(start)]


def _words(column: str, units: dict[str, str]) -> tuple[str, str]:
    for start, words, unit in RESULTS:
        if column.startswith(start):
            rest = column[len(start) :] if start.endswith(".") else ""
            return f"{words} {rest}".strip(), unit or units.get(rest, "")
    raise AssertionError(column)


def _number(value: object) -> float:
    return float(value) if isinstance(value, (int, float)) else math.nan


def _counted(words: Iterable[str]) -> tuple[tuple[str, int], ...]:
    return tuple(Counter(words).most_common())


def strongest(campaign: Campaign) -> list[tuple[Result, Influence]]:
    """For each result, what matters most, where it is more than chance (1 in 100) or a tenth of the variance."""
    found = []
    for result in campaign.results:
        if result.influences:
            first = result.influences[0]
            clear = first.total >= 0.1 if not math.isnan(first.total) else first.p < 0.01
            if clear:
                found.append((result, first))
    return found
