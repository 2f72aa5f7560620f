"""A run for a notebook: tables with units, read when they are asked for, however long the run was.

import rigd
run = rigd.open_run("runs/20260101T000000Z-demo-sweep")
run.tags                                   # what there is
run.samples("PT-1", start_s=600, end_s=900)["value"]
pandas.DataFrame(run.wide(every_s=10))     # or polars.DataFrame(...)
"""

from __future__ import annotations

import json
import math
import os
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from rigd.adapters.journal_reader import JournalReader, TagInfo
from rigd.model.events import EventKind
from rigd.model.samples import Quality

Column = NDArray[Any]
_SAMPLE = np.dtype([("t_ns", np.int64), ("value", np.float64), ("quality", np.int8)])


class Table(dict[str, Column]):
    """Columns of equal length by name; ``units`` holds the unit of each ("" for words and counts). A data frame library
    takes it as it is: ``pandas.DataFrame(table)``, ``polars.DataFrame(table)``."""

    def __init__(self, columns: Mapping[str, Column], units: Mapping[str, str] | None = None) -> None:
        super().__init__(columns)
        self.units = {name: (units or {}).get(name, "") for name in columns}

    @property
    def rows(self) -> int:
        """How many rows there are."""
        return len(next(iter(self.values()), ()))

    def with_units(self) -> dict[str, Column]:
        """The columns with the unit in their names, as ``PT-1 [bar]``."""
        return {f"{name} [{unit}]" if (unit := self.units[name]) else name: column for name, column in self.items()}


class Run:
    """A recorded run. Opening it reads next to nothing. Times are process time in seconds since its start."""

    def __init__(self, path: str | os.PathLike[str]) -> None:
        """``path`` is the run folder or its ``run.sqlite``. Raises ``JournalError``."""
        self._journal = JournalReader(Path(path))
        self.meta: Mapping[str, str] = self._journal.meta
        self.tags: Mapping[str, TagInfo] = self._journal.tags
        self.scans, start_ns, end_ns = self._journal.span()
        self.start_s, self.end_s = start_ns / 1e9, end_ns / 1e9

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.close()

    def __repr__(self) -> str:
        words = f"{self.meta.get('rig', '?')}, {self.meta.get('recipe', '?')}, {self.meta.get('outcome', 'not ended')}"
        return f"<run {self._journal.path.parent.name}: {words}, {self.end_s:.0f} s, {len(self.tags)} tags>"

    def close(self) -> None:
        """Give the files back."""
        self._journal.close()

    def samples(self, tag: str, start_s: float = 0.0, end_s: float = math.inf) -> Table:
        """All samples of a tag, as they came: ``t_s``, ``value`` (NaN where there was none), ``quality`` (0 good,
        1 uncertain, 2 bad). ``KeyError`` for an unknown tag."""
        rows = np.fromiter(self._journal.sample_rows(tag, start_s, end_s), dtype=_SAMPLE)
        columns = {"t_s": rows["t_ns"] / 1e9, "value": rows["value"], "quality": rows["quality"]}
        return Table(columns, {"t_s": "s", "value": self.tags[tag].unit})

    def overview(self, tag: str) -> Table:
        """Each minute of a tag: ``t_s`` of its start, ``low``, ``mean``, ``high`` of what was not bad, the ``number``
        of such samples, the ``worst`` quality. Quick for a week."""
        rows = list(self._journal.minute_rows(tag))
        names = ("t_s", "low", "mean", "high", "number", "worst")
        table = np.array(rows, dtype=np.float64).reshape(len(rows), len(names))
        columns: dict[str, Column] = dict(zip(names, table.T, strict=True))
        columns |= {name: columns[name].astype(np.int64) for name in ("number", "worst")}
        unit = self.tags[tag].unit
        return Table(columns, {"t_s": "s", "low": unit, "mean": unit, "high": unit})

    def wide(
        self, tags: Sequence[str] = (), every_s: float = 1.0, start_s: float = 0.0, end_s: float = math.inf
    ) -> Table:
        """One row every ``every_s``, one column per tag (all that have samples, if none are named): the last value at
        that time, NaN when it was bad or not there yet."""
        t_s = np.arange(start_s, min(end_s, self.end_s) + 1e-9, every_s)
        columns, units = {"t_s": t_s}, {"t_s": "s"}
        for tag in tags or self.tags:
            seen = self.samples(tag, 0.0 if start_s <= 0 else start_s - _LOOK_BACK_S, end_s)
            if seen.rows or tags:
                columns[tag], units[tag] = _held(seen, t_s), self.tags[tag].unit
        return Table(columns, units)

    def events(self, *kinds: str) -> Table:
        """What happened: ``t_s``, ``kind``, ``subject``, ``text``, ``fields`` (JSON)."""
        found = self._journal.events(*(EventKind(kind) for kind in kinds))
        words = {
            "kind": [event.kind.value for event in found],
            "subject": [event.subject for event in found],
            "text": [event.text for event in found],
            "fields": [json.dumps(dict(event.fields), ensure_ascii=False) for event in found],
        }
        columns = {"t_s": np.array([event.t_ns / 1e9 for event in found], dtype=np.float64)}
        return Table({**columns, **{name: _words(column) for name, column in words.items()}}, {"t_s": "s"})

    def points(self) -> Table:
        """What became of each point: ``t_s`` of its start, ``point``, ``status``, and every number that was told of it
        (NaN where none was), as ``conversion``, ``collected_mL``, and by tag its mean while it was steady."""
        stories: dict[str, dict[str, Any]] = {}
        for event in self._journal.events(EventKind.POINT):
            story = stories.setdefault(event.subject, {"t_s": event.t_ns / 1e9, "point": event.subject})
            story.update(event.fields)
        rows = list(stories.values())
        names = dict.fromkeys(name for row in rows for name, value in row.items() if _is_number(value))
        numbers = {name: np.array([_number(row.get(name)) for row in rows], dtype=np.float64) for name in names}
        words = {name: _words(str(row.get(name, "")) for row in rows) for name in ("point", "status")}
        units = {name: unit for name in names for ending, unit in _UNITS.items() if name.endswith(ending)}
        units |= {name: self.tags[name].unit for name in names if name in self.tags}
        return Table({**words, **numbers}, units)

    def orders(self) -> Table:
        """What was ordered: ``t_s``, ``number``, ``unit``, ``action``, ``value``, ``authority``, ``source``."""
        found = self._journal.orders()
        columns = {
            "t_s": np.array([order.t_ns / 1e9 for order in found], dtype=np.float64),
            "number": np.array([order.number for order in found], dtype=np.int64),
            "unit": _words(order.unit for order in found),
            "action": _words(order.action.value for order in found),
            "value": np.array([order.value for order in found], dtype=np.float64),
            "authority": _words(order.authority.name.lower() for order in found),
            "source": _words(order.source for order in found),
        }
        return Table(columns, {"t_s": "s"})


_UNITS = {"_mL": "mL", "_s": "s", "_degC": "degC", "_bar": "bar", "_mL_min": "mL/min"}
_LOOK_BACK_S = 3600.0
"""How far before the first row a last value is looked for."""


def open_run(path: str | os.PathLike[str]) -> Run:
    """Open a recorded run, also one that is still going on or that died. Raises ``JournalError``."""
    return Run(path)


def _is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _number(value: object) -> float:
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan


def _words(words: Iterable[str]) -> Column:
    return np.array(list(words), dtype=object)


def _held(seen: Table, t_s: Column) -> Column:
    """The last value at each time; NaN before the first and while the last one is bad."""
    index = np.searchsorted(seen["t_s"], t_s, side="right") - 1
    values = np.where(seen["quality"] == int(Quality.BAD), np.nan, seen["value"])
    if not len(values):
        return np.full(len(t_s), np.nan)
    return np.where(index >= 0, values[np.maximum(index, 0)], np.nan)
