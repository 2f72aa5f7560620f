"""The overview of a run: lowest, mean and highest value of every tag in every minute, kept while the run is written, so
that a week can be drawn without reading a week.

SQLite adds up, not Python: it costs the writer little and holds no lock of the interpreter. Bad samples count in
``worst`` only.
"""

from __future__ import annotations

import math
import sqlite3
from collections.abc import Iterator

MINUTE_NS = 60_000_000_000
UP_TO = "minutes_up_to"
"""Key in ``meta``: the last rowid of ``samples`` that is counted in ``minutes``."""

_ADDED_UP = f"""
SELECT tag, t_ns / {MINUTE_NS} AS minute, count(v) AS number, min(v) AS low, max(v) AS high, avg(v) AS mean,
    max(quality) AS worst
FROM (SELECT tag, t_ns, quality, CASE WHEN quality < 2 THEN value END AS v FROM samples WHERE rowid > ?1 {{}})
GROUP BY tag, minute
"""
_KEEP = f"""
INSERT INTO minutes SELECT * FROM ({_ADDED_UP.format("")}) WHERE true
ON CONFLICT (tag, minute) DO UPDATE SET
    mean = (ifnull(mean * number, 0) + ifnull(excluded.mean * excluded.number, 0))
        / nullif(number + excluded.number, 0),
    low = min(ifnull(low, excluded.low), ifnull(excluded.low, low)),
    high = max(ifnull(high, excluded.high), ifnull(excluded.high, high)),
    number = number + excluded.number, worst = max(worst, excluded.worst)
"""
_OF_TAG = f"""
SELECT minute, min(low), sum(mean * number) / sum(number), max(high), sum(number), max(worst)
FROM ({{}} SELECT minute, number, low, high, mean, worst FROM ({_ADDED_UP.format("AND tag = ?2")}))
GROUP BY minute ORDER BY minute
"""
_KEPT = "SELECT minute, number, low, high, mean, worst FROM minutes WHERE tag = ?2 UNION ALL"

MinuteRow = tuple[float, float, float, float, int, int]


def add_up(connection: sqlite3.Connection, after: int) -> int:
    """Count the samples after a rowid into ``minutes``; returns the last rowid counted. Part of the caller's
    transaction."""
    (last,) = connection.execute("SELECT ifnull(max(rowid), 0) FROM samples").fetchone()
    connection.execute(_KEEP, (after,))
    connection.execute("INSERT OR REPLACE INTO meta VALUES (?, ?)", (UP_TO, str(last)))
    return int(last)


def minutes_of(connection: sqlite3.Connection, tag: int) -> Iterator[MinuteRow]:
    """(start [s], low, mean, high, number, worst quality) of each minute of a tag: those that were kept, and the rest
    (a run that goes on or died, a journal from before they were kept) counted now. NaN where nothing was to be
    believed."""
    kept = connection.execute("SELECT 1 FROM sqlite_master WHERE name = 'minutes'").fetchone()
    up_to = connection.execute("SELECT value FROM meta WHERE key = ?", (UP_TO,)).fetchone()
    after = int(up_to[0]) if kept and up_to else 0
    for minute, low, mean, high, number, worst in connection.execute(
        _OF_TAG.format(_KEPT if kept else ""), (after, tag)
    ):
        values = (math.nan if value is None else value for value in (low, mean, high))
        yield (60.0 * minute, *values, number, worst)
