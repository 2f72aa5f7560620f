"""Checking a run journal against its chain of hashes. Reads only.

What can be told apart: a record that is whole; one that ends without its end, as after ``kill -9`` or a power cut, with
everything before that sealed and true (*torn*); a file that cannot be read to its end (*damaged*: cut short, or broken
by the disk), with everything that can be read still true; and a record in which something that can be read is not what
was sealed (*tampered*). What cannot be told from the file alone: whether its tail was cut by a person, or the whole was
written anew. For that compare a head that left the computer with an alert, or was printed at the end.
"""

from __future__ import annotations

import hashlib
import json
import sqlite3
import struct
from dataclasses import dataclass, field
from enum import StrEnum
from pathlib import Path
from typing import Any

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_chain import COLUMNS, START, encoded, linked, text_digest
from rigd.adapters.journal_minutes import UP_TO
from rigd.adapters.journal_reader import open_segment, segments
from rigd.model.errors import JournalError


class Finding(StrEnum):
    """What a record turned out to be, best first."""

    INTACT = "intact"
    TORN = "torn"
    DAMAGED = "damaged"
    TAMPERED = "tampered"
    UNSEALED = "unsealed"


@dataclass(slots=True)
class Verified:
    """What was found: the last head that holds, how many records and rows it covers, how many rows of a torn record
    came after its last seal, and in words what is wrong.

    ``anchor`` tells whether the head that was asked for stands in the chain; ``None`` when none was asked for.
    """

    finding: Finding = Finding.INTACT
    head: str = START.hex()
    records: int = 0
    rows: int = 0
    unsealed: int = 0
    words: str = ""
    outcome: str = ""
    anchor: bool | None = None
    notes: list[str] = field(default_factory=list)


class _Broken(Exception):
    """Something that can be read is not what was sealed."""


def verify(run: Path, anchor: str = "") -> Verified:
    """Check a run by its folder or its ``run.sqlite``. ``anchor`` is a head from elsewhere. ``JournalError`` when there
    is no journal."""
    first = run / "run.sqlite" if run.is_dir() else run
    if not first.is_file():
        raise JournalError(f"there is no journal {first}")
    found = Verified(anchor=False if anchor else None)
    files = segments(first)
    heads = {START.hex()}
    for number, path in enumerate(files, 1):
        try:
            _segment(path, number, found, heads, anchor.lower())
        except _Broken as broken:
            missing = _missing(path)
            if missing and number == len(files):  # the lost pages read as nothing
                _unreadable(path, f"{missing} bytes are missing at its end", found, last=True)
                break
            found.finding, found.words = Finding.TAMPERED, f"{path.name}: {broken}"
            return found
        except (sqlite3.Error, JournalError) as error:
            missing = _missing(path)
            why = f"{missing} bytes are missing at its end" if missing else str(error)
            _unreadable(path, why, found, last=number == len(files))
        if found.finding is Finding.UNSEALED:
            return found
    if found.finding is Finding.INTACT and not found.outcome:
        found.finding = Finding.TORN
        found.words = "it ends without its end: the run goes on, or the daemon died; all that was sealed is true"
        if found.unsealed:
            found.words += f", {found.unsealed} rows after the last seal (a second at most) cannot be judged"
    return found


def _unreadable(path: Path, why: str, found: Verified, last: bool) -> None:
    if not last:
        found.notes.append(f"{path.name} cannot be read to its end, as after a disk that failed: {why}")
        return
    found.finding = Finding.DAMAGED
    found.words = f"{path.name} cannot be read beyond record {found.records} ({why}); what can be is true"


def _missing(path: Path) -> int:
    """How many bytes a file is shorter than its own header says; with a write-ahead log beside it, nobody knows."""
    if path.with_name(path.name + "-wal").exists():
        return 0
    with path.open("rb") as file:
        header = file.read(100)
    page = int.from_bytes(header[16:18], "big")
    said = (65536 if page == 1 else page) * int.from_bytes(header[28:32], "big")
    return max(0, said - path.stat().st_size)


def _segment(path: Path, number: int, found: Verified, heads: set[str], anchor: str) -> None:
    connection = open_segment(path)
    try:
        connection.execute("BEGIN")  # one moment of a run that goes on
        connection.text_factory = lambda text: text.decode(errors="surrogateescape")
        if not connection.execute("SELECT 1 FROM sqlite_master WHERE name = 'audit'").fetchone():
            found.finding, found.words = Finding.UNSEALED, "it was recorded without a chain of hashes"
            return
        _Walk(connection, number, found, heads, anchor).walk()
    finally:
        connection.close()


class _Walk:
    """One file of a journal, record by record."""

    def __init__(
        self, connection: sqlite3.Connection, number: int, found: Verified, heads: set[str], anchor: str
    ) -> None:
        self._connection, self._number, self._found = connection, number, found
        self._heads, self._anchor = heads, anchor
        self._head = START
        self._meta: dict[str, str] = {}
        self._rows = {table: connection.execute(f"SELECT * FROM {table} ORDER BY rowid") for table in COLUMNS}
        self._ended = False

    def walk(self) -> None:
        """Raises ``_Broken`` at the first thing that is not as sealed."""
        expected = None
        for seq, line, told in self._connection.execute("SELECT seq, body, hash FROM audit ORDER BY seq"):
            body = self._body(seq, line)
            if expected is None:
                self._begin(seq, body)
            elif seq != expected:
                raise _Broken(f"record {expected} is missing")
            expected = seq + 1
            if self._ended:
                raise _Broken(f"record {seq} comes after the end")
            self._head = linked(self._head, line.encode(errors="surrogatepass"))
            if self._head.hex() != told:
                raise _Broken(f"record {seq} is not what it was when it was written, or one before it")
            self._heads.add(told)
            self._contents(seq, body)
            self._found.head, self._found.records = told, self._found.records + 1
            if told == self._anchor:
                self._found.anchor = True
        if expected is None:
            raise _Broken("it holds no record, not even the first")
        self._rest()

    def _body(self, seq: int, line: str) -> dict[str, Any]:
        try:
            body = json.loads(line)
        except (ValueError, TypeError):
            body = None
        if not isinstance(body, dict) or body.get("seq") != seq:
            raise _Broken(f"record {seq} is not one that rigd writes")
        return body

    def _begin(self, seq: int, body: dict[str, Any]) -> None:
        previous = str(body.get("previous", ""))
        if body.get("kind") != "begin" or body.get("segment") != self._number:
            raise _Broken(f"it does not begin with the first record of part {self._number}")
        if previous not in self._heads or (self._number == 1 and seq != 1):
            raise _Broken(f"its first record names the head {previous[:16]}, which no earlier part holds")
        self._head = bytes.fromhex(previous)
        tags = [list(row) for row in self._connection.execute("SELECT * FROM tags ORDER BY id")]
        if text_digest(schema.compact(tags)) != body.get("tags"):
            raise _Broken("the list of tags is not what it was")

    def _contents(self, seq: int, body: dict[str, Any]) -> None:
        self._meta |= body.get("meta", {})
        if body["kind"] == "end":
            self._ended, self._found.outcome = True, str(body.get("outcome"))
        for table, (count, sealed) in body.get("rows", {}).items():
            rows = self._rows[table].fetchmany(count) if count else []
            if len(rows) < count:
                raise _Broken(f"{count - len(rows)} rows of {table} that record {seq} seals are missing")
            if _digest(table, rows) != sealed:
                raise _Broken(
                    f"the rows of {table} that record {seq} ({body.get('utc', '')}) seals are not what they were"
                )
            self._found.rows += count

    def _rest(self) -> None:
        """Nothing may stand there that no record covers, and nothing may be missing."""
        if "outcome" in self._meta and not self._ended:
            raise _Broken("it was ended, but its last record is missing")
        for table, rows in self._rows.items():
            if left := sum(1 for _ in rows):
                if self._ended:
                    raise _Broken(f"{table} holds {left} rows that no record seals")
                self._found.unsealed += left
        for key, value in self._connection.execute("SELECT key, value FROM meta"):
            if key != UP_TO and self._meta.get(key) != text_digest(value):
                raise _Broken(f"the fact {key!r} is not what it was, or was not there")
        there = {key for (key,) in self._connection.execute("SELECT key FROM meta")}
        if missing := sorted(self._meta.keys() - there):
            raise _Broken(f"the fact {missing[0]!r} is missing")


def _digest(table: str, rows: list[Any]) -> str:
    try:
        return hashlib.sha256(encoded(table, rows)).hexdigest()
    except (TypeError, ValueError, AttributeError, OverflowError, struct.error):
        return ""  # a value of a kind that rigd does not write
