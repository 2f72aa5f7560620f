"""The run journal: one SQLite file, one writer thread, no waiting for the disk.

What it promises. Inputs are queued before the scan that acts on them is decided. A transaction holds whole scans and is
committed as soon as nothing more is queued, so ``kill -9`` of the daemon loses one scan at most. A commit that holds an
order or an event, and at least one commit a second, is also forced to the medium (fsync); a power cut can cost the
plain samples of the last second. A stop never waits for any of this.

When the disk is full the rows wait in memory (up to ``BACKLOG`` entries) and are tried again; ``trouble`` says so at
once. After any other error the file is left as it is and a new segment is begun beside it, because a file that failed
to sync cannot be trusted any more (Rebello et al., USENIX ATC 2020).
"""

from __future__ import annotations

import sqlite3
import threading
import time
from collections.abc import Callable, Iterable, Mapping, Sequence
from pathlib import Path
from queue import Empty, SimpleQueue
from typing import Any

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_chain import Chain
from rigd.adapters.journal_minutes import add_up
from rigd.model.errors import JournalError
from rigd.model.events import Event
from rigd.model.intake import Intake
from rigd.model.orders import Order
from rigd.model.rig import Tag
from rigd.model.samples import Spectrum

BACKLOG = 200_000
"""Entries that may wait in memory for a disk that is full; newer ones are counted and lost beyond that."""
RETRY_S = 1.0
FORCE_S = 1.0
COUNT_S = 10.0
"""How often the overview by the minute is brought up to date."""
LATE = 5_000
"""With more entries than this waiting, the disk does not keep up."""

Connect = Callable[[Path], sqlite3.Connection]
Entry = tuple[str, tuple[Any, ...]]
Rows = Iterable[tuple[str, Sequence[schema.Row]]]


def connect(path: Path) -> sqlite3.Connection:
    """Open a database file for the writer: explicit transactions, write-ahead log."""
    connection = sqlite3.connect(path, isolation_level=None, check_same_thread=False, timeout=5.0)
    connection.execute("PRAGMA journal_mode = WAL")
    connection.execute("PRAGMA synchronous = NORMAL")
    return connection


class SqliteJournal:
    """Implements ``rigd.ports.journal.Journal``. ``meta`` are texts about the run (configuration, versions,
    digests)."""

    def __init__(self, path: Path, meta: Mapping[str, str], tags: Sequence[Tag], connect: Connect = connect) -> None:
        """Make the file and its tables; ``JournalError`` when that is not possible."""
        self._path, self._connect = path, connect
        self._meta = {"schema": str(schema.SCHEMA), **meta}
        self._tags = {tag.id: number for number, tag in enumerate(tags, 1)}
        self._tag_rows = [_tag_row(number, tag) for number, tag in enumerate(tags, 1)]
        self._queue: SimpleQueue[Entry | None] = SimpleQueue()
        self._trouble = ""
        self._lost = 0
        self._segment = 1
        self._chain = Chain(self._meta)
        self._writer = _Writer(self)
        try:
            self._connection = self.open_segment(path)
        except sqlite3.Error as error:
            raise JournalError(f"cannot write the journal {path}: {error}") from error
        self._thread = threading.Thread(target=self._writer.run, name="journal", daemon=True)
        self._thread.start()

    def scan(self, number: int, now_ns: int, utc: str, intake: Intake) -> None:
        """Queue the inputs of a scan."""
        self._put(("scan", (number, now_ns, utc, intake)))

    def decided(self, number: int, orders: Sequence[Order], events: Sequence[Event]) -> None:
        """Queue what a scan decided; ends that scan's part of the record."""
        self._put(("decided", (number, tuple(orders), tuple(events))))

    def spectrum(self, spectrum: Spectrum) -> None:
        """Queue a raw spectrum."""
        self._put(("spectrum", (spectrum,)))

    def bytes_seen(self, link: str, t_ns: int, sent: bool, data: bytes) -> None:
        """Queue raw bytes."""
        self._put(("bytes", (link, t_ns, sent, data)))

    def note(self, key: str, value: str) -> None:
        """Queue a fact about the run for ``meta`` (the identity of a device, say)."""
        self._put(("meta", (key, value)))

    def trouble(self) -> str:
        """Why the journal is not being written, or ""."""
        if self._trouble:
            return self._trouble
        waiting = self._queue.qsize()
        if waiting > LATE:
            return f"the disk does not keep up: {waiting} records wait"
        return "the journal's writer has ended" if not self._thread.is_alive() else ""

    def behind(self) -> bool:
        """True while so much waits that whoever can wait should."""
        return self._queue.qsize() > LATE // 2 and self._thread.is_alive() and not self._trouble

    def head(self) -> tuple[int, str]:
        """Number and hash of the last record of the chain that is in the file."""
        return self._chain.head

    def close(self, outcome: str) -> None:
        """Write what is queued and the outcome, end the file; waits up to 10 s, then gives up with ``JournalError``."""
        if self._lost:
            self._queue.put(("meta", ("lost_records", str(self._lost))))
        self._queue.put(("meta", ("outcome", outcome)))
        self._queue.put(None)
        self._thread.join(10.0)
        if self._thread.is_alive() or self._trouble:
            raise JournalError(f"the journal {self._path} could not be ended: {self._trouble or 'the disk hangs'}")

    def open_segment(self, path: Path) -> sqlite3.Connection:
        """A connection to ``path`` with tables, facts and tags in place."""
        connection = self._connect(path)
        connection.executescript(schema.TABLES)
        connection.execute("BEGIN")
        meta = [*self._meta.items(), ("segment", str(self._segment))]
        connection.executemany(schema.INSERT_META, meta)
        connection.executemany(schema.INSERT_TAG, self._tag_rows)
        connection.executemany(schema.INSERT_AUDIT, self._chain.begin(self._segment, meta, self._tag_rows))
        connection.execute("COMMIT")
        self._chain.keep()
        return connection

    def _put(self, entry: Entry) -> None:
        if self._trouble and self._queue.qsize() > BACKLOG:
            self._lost += 1
            return
        self._queue.put(entry)


class _Writer:
    """The thread's half: takes entries, makes rows, commits, and copes with a disk that fails."""

    def __init__(self, journal: SqliteJournal) -> None:
        self._of = journal
        self._forced_s = 0.0
        self._counted_s = time.monotonic()
        self._counted_to = 0

    def run(self) -> None:
        while True:
            entries, going = self._take()
            if entries:
                self._store(entries, going)
            if not going:
                self._end()
                return

    def _take(self) -> tuple[list[Entry], bool]:
        """Wait for whole scans; returns them, and False when the journal is being closed."""
        queue, open_scan = self._of._queue, False
        entries: list[Entry] = []
        while True:
            try:
                entry = queue.get_nowait() if entries and not open_scan else queue.get()
            except Empty:
                return entries, True
            if entry is None:
                return entries, False
            entries.append(entry)
            if entry[0] in ("scan", "decided"):
                open_scan = entry[0] == "scan"
            if len(entries) >= 2_000 and not open_scan:
                return entries, True

    def _store(self, entries: list[Entry], going: bool) -> None:
        rows, important = self._rows(entries)
        patience = None if going else 5
        while not self._try(rows, important):
            if patience == 0:
                return
            patience = None if patience is None else patience - 1
            time.sleep(RETRY_S)

    def _try(self, rows: list[tuple[str, list[schema.Row]]], important: bool) -> bool:
        journal = self._of
        try:
            self._commit(journal._connection, rows, important)
        except sqlite3.Error as error:
            journal._trouble = f"{journal._path.name} cannot be written: {error}"
            self._recover(error)
            return False
        journal._trouble = ""
        return True

    def _commit(
        self, connection: sqlite3.Connection, rows: Iterable[tuple[str, list[schema.Row]]], important: bool
    ) -> None:
        now_s = time.monotonic()
        force = important or now_s - self._forced_s >= FORCE_S
        connection.execute(f"PRAGMA synchronous = {'FULL' if force else 'NORMAL'}")
        connection.execute("BEGIN IMMEDIATE")
        for statement, values in rows:
            connection.executemany(statement, values)
        connection.executemany(schema.INSERT_AUDIT, self._of._chain.extend(rows, seal=force))
        count = now_s - self._counted_s >= COUNT_S
        counted_to = add_up(connection, self._counted_to) if count else self._counted_to
        connection.execute("COMMIT")
        self._of._chain.keep()
        if force:
            self._forced_s = now_s
        if count:
            self._counted_s, self._counted_to = now_s, counted_to

    def _recover(self, error: sqlite3.Error) -> None:
        """Make the next try possible: the same file when it is only full or locked, a new segment otherwise."""
        journal = self._of
        code = getattr(error, "sqlite_errorcode", None)
        try:
            if journal._connection.in_transaction:
                journal._connection.execute("ROLLBACK")
            if code in (sqlite3.SQLITE_FULL, sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
                return
            journal._connection.close()
        except sqlite3.Error:
            pass  # a broken connection may refuse even this; it is replaced below
        journal._segment += 1
        path = journal._path.with_name(f"{journal._path.stem}.{journal._segment}{journal._path.suffix}")
        try:
            journal._connection = journal.open_segment(path)
        except sqlite3.Error as again:
            journal._segment -= 1
            journal._trouble = f"no new segment of {journal._path.name} can be begun: {again}"
        else:
            self._counted_to = 0

    def _rows(self, entries: list[Entry]) -> tuple[list[tuple[str, list[schema.Row]]], bool]:
        """Rows per statement in a fixed order, and whether any order or event is among them."""
        rows: dict[str, list[schema.Row]] = {}
        for kind, values in entries:
            for statement, more in getattr(self, f"_{kind}_rows")(*values):
                rows.setdefault(statement, []).extend(more)
        important = schema.INSERT_ORDER in rows or schema.INSERT_EVENT in rows
        return list(rows.items()), important

    def _scan_rows(self, number: int, now_ns: int, utc: str, intake: Intake) -> Rows:
        yield schema.INSERT_SCAN, ((number, now_ns, utc),)
        yield schema.INSERT_SAMPLE, schema.sample_rows(number, self._of._tags, intake.samples)
        yield schema.INSERT_INPUT, schema.input_rows(number, intake)

    def _decided_rows(self, number: int, orders: tuple[Order, ...], events: tuple[Event, ...]) -> Rows:
        if orders:
            yield schema.INSERT_ORDER, [schema.order_row(number, order) for order in orders]
        if events:
            yield schema.INSERT_EVENT, [schema.event_row(number, event) for event in events]

    def _spectrum_rows(self, spectrum: Spectrum) -> Rows:
        yield schema.INSERT_SPECTRUM, (schema.spectrum_row(spectrum),)

    def _bytes_rows(self, link: str, t_ns: int, sent: bool, data: bytes) -> Rows:
        yield schema.INSERT_BYTES, ((link, t_ns, int(sent), data),)

    def _meta_rows(self, key: str, value: str) -> Rows:
        yield schema.INSERT_META, ((key, value),)

    def _end(self) -> None:
        try:
            add_up(self._of._connection, self._counted_to)
            self._of._connection.execute("PRAGMA journal_mode = DELETE")  # one file, easy to copy and to archive
            self._of._connection.close()
        except sqlite3.Error as error:
            self._of._trouble = self._of._trouble or str(error)


def _tag_row(number: int, tag: Tag) -> schema.Row:
    labels = schema.compact(list(tag.labels))
    return (number, tag.id, tag.title, tag.kind.value, tag.measures, tag.unit, float(tag.low), float(tag.high), labels)
