"""Reading a run journal, also while it is being written, also after ``kill -9``; never changes it."""

from __future__ import annotations

import json
import math
import sqlite3
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from types import TracebackType
from typing import Any, Self, TypeVar

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_minutes import MinuteRow, minutes_of
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Order
from rigd.model.samples import Spectrum


@dataclass(frozen=True, slots=True)
class TagInfo:
    """A tag as the journal describes it."""

    id: str
    title: str
    kind: str
    measures: str
    unit: str
    low: float
    high: float
    labels: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class ScanRecord:
    """One scan: what went in and what came out."""

    number: int
    now_ns: int
    utc: str
    intake: Intake
    orders: tuple[Order, ...]
    events: tuple[Event, ...]


@dataclass(frozen=True, slots=True)
class Series:
    """All samples of a tag in order: process time [ns], value (NaN where there was none), quality (0 good to 2 bad)."""

    t_ns: list[int]
    values: list[float]
    quality: list[int]


_Value = TypeVar("_Value")


class JournalReader:
    """A run by its folder or its ``run.sqlite``. Use as a context manager. Raises ``JournalError`` with one
    sentence."""

    def __init__(self, path: Path) -> None:
        first = path / "run.sqlite" if path.is_dir() else path
        if not first.is_file():
            raise JournalError(f"there is no journal {first}")
        self.path = first
        self._segments = [open_segment(segment) for segment in segments(first)]
        try:
            self.meta = self._meta()
            self.tags = {row[1]: _tag_info(row) for row in list(self._rows("SELECT * FROM tags ORDER BY id"))}
            self._names: dict[int, str] = dict(self._segments[0].execute("SELECT id, tag FROM tags"))
        except (sqlite3.Error, ValueError, TypeError) as error:
            self.close()
            raise JournalError(f"{first} is not a run journal that can be read: {error}") from error
        except JournalError:
            self.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """Give the files back."""
        for segment in self._segments:
            segment.close()

    def scans(self, after: int = 0) -> Iterator[ScanRecord]:
        """All scans in order, or those with a number above ``after``. A scan that was recorded twice, around a failure
        of the disk, comes once."""
        last = after
        for segment in self._segments:
            for record in self._segment_scans(segment, after):
                if record.number > last:
                    last = record.number
                    yield record

    def span(self) -> tuple[int, int, int]:
        """Number of the last scan, process time of the first and of the last [ns]; zeros for an empty journal."""
        try:
            heads = [segment.execute(f"{_NOW} ORDER BY number LIMIT 1").fetchone() for segment in self._segments]
            tails = [segment.execute(f"{_NOW} ORDER BY number DESC LIMIT 1").fetchone() for segment in self._segments]
        except sqlite3.DatabaseError as error:
            raise JournalError(f"{self.path} is damaged: {error}") from error
        heads, tails = [row for row in heads if row], [row for row in tails if row]
        return (tails[-1][0], heads[0][1], tails[-1][1]) if heads else (0, 0, 0)

    def events(self, *kinds: EventKind) -> list[Event]:
        """All events, or those of some kinds, in order."""
        wanted = f" WHERE kind IN ({', '.join('?' * len(kinds))})" if kinds else ""
        sql = f"SELECT kind, subject, t_ns, text, fields FROM events{wanted} ORDER BY rowid"
        return self._values(schema.event_of, sql, [kind.value for kind in kinds])

    def orders(self) -> list[Order]:
        """All orders in order."""
        sql = "SELECT number, unit, action, value, authority, source, t_ns FROM orders ORDER BY rowid"
        return self._values(schema.order_of, sql)

    def series(self, tag: str) -> Series:
        """All samples of one tag; an empty series for a tag without any; ``KeyError`` for an unknown tag."""
        rows = list(self.sample_rows(tag, -math.inf, math.inf))
        return Series([row[0] for row in rows], [row[1] for row in rows], [row[2] for row in rows])

    def sample_rows(self, tag: str, start_s: float, end_s: float) -> Iterator[tuple[int, float, int]]:
        """(time [ns], value or NaN, quality) of a tag within a span of process time [s]; both ends count. ``KeyError``
        for an unknown tag. What lies outside of the span is not read."""
        number = self._number(tag)
        start_ns, end_ns = (round(min(max(at_s * 1e9, 0), _NO_MORE - 1024)) for at_s in (start_s, end_s))
        for segment in self._segments:
            yield from self._guarded(partial(_samples, segment, number, start_ns, end_ns))

    def minute_rows(self, tag: str) -> Iterator[MinuteRow]:
        """(start [s], low, mean, high, number, worst quality) of each minute of a tag; ``KeyError`` for an unknown
        one."""
        number = self._number(tag)
        for segment in self._segments:
            yield from self._guarded(partial(minutes_of, segment, number))

    def ages_ms(self) -> dict[str, dict[int, int]]:
        """How old the samples of each tag were when they were judged: how many at each age [ms, rounded down]."""
        found: dict[str, dict[int, int]] = {}
        for tag, age_ms, number in self._rows(_AGES):
            counts = found.setdefault(tag, {})
            counts[age_ms] = counts.get(age_ms, 0) + number
        return found

    def _number(self, tag: str) -> int:
        for number, name in self._names.items():
            if name == tag:
                return number
        raise KeyError(tag)

    def spectra(self) -> Iterator[Spectrum]:
        """All raw spectra in order."""
        for row in self._rows("SELECT * FROM spectra ORDER BY rowid"):
            yield schema.spectrum_of(*row)

    def head(self) -> str:
        """Number and hash of the last record of the chain as "n hash"; "" for a journal without one."""
        last = ""
        for segment in self._segments:
            if segment.execute("SELECT 1 FROM sqlite_master WHERE name = 'audit'").fetchone():
                row = segment.execute("SELECT seq, hash FROM audit ORDER BY seq DESC LIMIT 1").fetchone()
                last = f"{row[0]} {row[1]}" if row else last
        return last

    def clock(self) -> list[tuple[int, str]]:
        """(process time [ns], UTC) of every scan."""
        return list(self._rows("SELECT now_ns, utc FROM scans ORDER BY number"))

    def _meta(self) -> dict[str, str]:
        meta: dict[str, str] = {}
        for segment in self._segments:
            if not segment.execute("SELECT 1 FROM sqlite_master WHERE name = 'meta'").fetchone():
                raise ValueError(
                    "it has no table of facts: the run ended before its first record, or it is another file"
                )
            meta.update(segment.execute("SELECT key, value FROM meta"))
        if (found := meta.get("schema", "none")) != str(schema.SCHEMA):
            raise ValueError(_other_version(found, meta.get("version", "of an unknown version")))
        return meta

    def _values(self, make: Callable[..., _Value], sql: str, values: Iterable[Any] = ()) -> list[_Value]:
        """Rows as values, with an error for people when one of them makes no sense."""
        rows = list(self._rows(sql, values))
        try:
            return [make(*row) for row in rows]
        except (ValueError, TypeError) as error:
            raise JournalError(f"{self.path} is damaged: {error}") from error

    def _rows(self, sql: str, values: Iterable[Any] = ()) -> Iterator[Any]:
        values = tuple(values)
        for segment in self._segments:
            yield from self._guarded(partial(segment.execute, sql, values))

    def _guarded(self, read: Callable[[], Iterable[Any]]) -> Iterator[Any]:
        """Rows, with an error for people when the file is damaged."""
        try:
            yield from read()
        except sqlite3.DatabaseError as error:
            raise JournalError(f"{self.path} is damaged: {error}") from error

    def _segment_scans(self, segment: sqlite3.Connection, after: int) -> Iterator[ScanRecord]:
        names, sample_of = self._names, schema.sample_of
        try:
            samples, inputs, orders, events = (_Grouped(segment, table, columns, after) for table, columns in _OF_SCAN)
            for number, now_ns, utc in segment.execute(
                "SELECT number, now_ns, utc FROM scans WHERE number > ? ORDER BY number", (after,)
            ):
                yield ScanRecord(
                    number,
                    now_ns,
                    utc,
                    schema.intake_of(
                        tuple([sample_of(names[tag], *rest) for _, tag, *rest in samples.of(number)]),
                        inputs.of(number),
                    ),
                    tuple([schema.order_of(*row[1:]) for row in orders.of(number)]),
                    tuple([schema.event_of(*row[1:]) for row in events.of(number)]),
                )
        except (sqlite3.DatabaseError, ValueError, KeyError, TypeError, IndexError) as error:
            raise JournalError(f"{self.path} is damaged: {error}") from error


_NOW = "SELECT number, now_ns FROM scans"
_OF_SCAN = (
    ("samples", "scan, tag, t_ns, value, quality, cause, raw"),
    ("inputs", "scan, kind, body"),
    ("orders", "scan, number, unit, action, value, authority, source, t_ns"),
    ("events", "scan, kind, subject, t_ns, text, fields"),
)


class _Grouped:
    """Walks the rows of a table that are in scan order, handing out those of one scan at a time. The first column is
    the scan."""

    __slots__ = ("_number", "_row", "_rows")

    def __init__(self, connection: sqlite3.Connection, table: str, columns: str, after: int) -> None:
        first = rowid_after(connection, table, "scan", after) if after else 0
        self._rows = connection.execute(f"SELECT {columns} FROM {table} WHERE rowid >= ? ORDER BY rowid", (first,))
        self._row: Any = None
        self._number = 0
        self._advance()

    def of(self, scan: int) -> Sequence[Any]:
        """The rows of this scan; those of earlier ones are left behind."""
        if self._number > scan:
            return ()
        while self._number < scan:
            self._advance()
        found = []
        while self._number == scan:
            found.append(self._row)
            self._advance()
        return found

    def _advance(self) -> None:
        self._row = row = self._rows.fetchone()
        self._number = _NO_MORE if row is None else row[0]


_NO_MORE = (1 << 63) - 1
_WAITING_NS = 60_000_000_000
"""A sample is recorded with the next scan, which is never this late in a record that goes on."""


def _samples(segment: sqlite3.Connection, tag: int, start_ns: int, end_ns: int) -> Iterator[tuple[int, float, int]]:
    """Samples of a tag within a span, both ends included; only the rows around the span are read."""
    first = rowid_after(segment, "scans", "now_ns", start_ns - 1)
    last = rowid_after(segment, "scans", "now_ns", min(end_ns + _WAITING_NS, _NO_MORE))
    rows = (rowid_after(segment, "samples", "scan", first - 1), rowid_after(segment, "samples", "scan", last - 1) - 1)
    for t_ns, value, quality in segment.execute(_OF_TAG, (tag, start_ns, end_ns, *rows)):
        yield t_ns, math.nan if value is None else value, quality


_OF_TAG = (
    "SELECT t_ns, value, quality FROM samples WHERE tag = ?1 AND t_ns BETWEEN ?2 AND ?3 AND rowid BETWEEN ?4 AND ?5 "
    "ORDER BY rowid"
)


_AGES = (
    "SELECT tags.tag, MAX(scans.now_ns - samples.t_ns, 0) / 1000000 AS age_ms, COUNT(*) FROM samples "
    "JOIN scans ON scans.number = samples.scan JOIN tags ON tags.id = samples.tag GROUP BY 1, 2"
)


def rowid_after(connection: sqlite3.Connection, table: str, column: str, value: int) -> int:
    """The first rowid whose ``column`` is above ``value``, by halving: rows stand in the order of arrival, so that the
    order of the file is the index, and it costs the writer nothing."""
    # two look-ups: SQLite walks the whole table for a lowest and a highest in one
    (low,) = connection.execute(f"SELECT coalesce(min(rowid), 1) FROM {table}").fetchone()
    (high,) = connection.execute(f"SELECT coalesce(max(rowid), 0) FROM {table}").fetchone()
    while low <= high:
        middle = (low + high) // 2
        row = connection.execute(f"SELECT {column} FROM {table} WHERE rowid >= ? LIMIT 1", (middle,)).fetchone()
        if row[0] > value:
            high = middle - 1
        else:
            low = middle + 1
    return int(low)


def segments(first: Path) -> list[Path]:
    """The files of a journal in order."""
    later = sorted(first.parent.glob(f"{first.stem}.*{first.suffix}"), key=lambda path: (len(path.name), path.name))
    return [first, *later]


def open_segment(path: Path) -> sqlite3.Connection:
    """Read-only; when the folder cannot be written either (an archive), without the write-ahead log's side files."""
    failure: sqlite3.Error | None = None
    log = path.with_name(f"{path.name}-wal")
    for query in ("mode=ro", "immutable=1"):
        if failure is not None and log.is_file() and log.stat().st_size:
            raise JournalError(
                f"{path} was never closed, and a part of it stands in {log.name}, which cannot be read in a folder "
                "that cannot be written; copy the whole folder to another place and read it there"
            )
        try:
            connection = sqlite3.connect(f"{path.absolute().as_uri()}?{query}", uri=True)
            connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
            return connection
        except sqlite3.Error as error:
            failure = error
    raise JournalError(f"{path} cannot be opened as a run journal: {failure}") from failure


def _other_version(found: str, writer: str) -> str:
    """Why a journal of another schema is refused: its rows might mean something else."""
    return (
        f"its schema is version {found}, this program reads version {schema.SCHEMA} only and does not guess what the "
        f"rows of another version mean; read it with the program that wrote it (rigd {writer})"
    )


def _tag_info(row: tuple[Any, ...]) -> TagInfo:
    _, tag, title, kind, measures, unit, low, high, labels = row
    return TagInfo(tag, title, kind, measures, unit, low, high, tuple(json.loads(labels)))
