"""The journal: exact round trip, kill -9, a disk that is full or broken, export."""

from __future__ import annotations

import csv
import math
import os
import signal
import sqlite3
import subprocess
import sys
import textwrap
import time
from pathlib import Path

import pytest
from fakes.journal_rows import TAGS, UTC, S, decisions, filled, rich_intake

from rigd.adapters import journal_sqlite
from rigd.adapters.journal_export import events_csv, export_csv
from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.samples import Quality, QualityCause, Sample, Spectrum


def test_everything_comes_back_as_it_went_in(tmp_path: Path) -> None:
    filled(tmp_path / "run.sqlite")
    with JournalReader(tmp_path) as journal:
        records = list(journal.scans())
        assert [record.number for record in records] == list(range(1, 21))
        for record in records:
            assert record.intake == rich_intake(record.number)
            assert (list(record.orders), list(record.events)) == decisions(record.number)
            assert (record.now_ns, record.utc) == (record.number * S, UTC)
        assert list(journal.spectra()) == [Spectrum("ir", 5, 860.0, 4.0, (0.5, -0.25, 1.0))]
        assert journal.meta["outcome"] == "done"
        assert journal.series("V-A.position").values == [1.0] * 20


def test_a_value_that_is_not_a_number_comes_back_as_one(tmp_path: Path) -> None:
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS)
    journal.scan(1, 0, UTC, Intake(samples=(Sample("PT-1", math.nan, 0, Quality.BAD, QualityCause.NOT_A_NUMBER),)))
    journal.decided(1, [], [])
    journal.close("done")
    with JournalReader(tmp_path / "run.sqlite") as reader:
        (record,) = reader.scans()
    assert math.isnan(record.intake.samples[0].value)
    assert record.intake.samples[0].cause is QualityCause.NOT_A_NUMBER


VICTIM = """
import sys, time
from pathlib import Path
sys.path.insert(0, sys.argv[2])
from fakes.journal_rows import TAGS, UTC, S, decisions, rich_intake
from rigd.adapters.journal_sqlite import SqliteJournal
journal = SqliteJournal(Path(sys.argv[1]), {}, TAGS)
number = 0
while True:
    number += 1
    journal.scan(number, number * S, UTC, rich_intake(number))
    journal.decided(number, *decisions(number))
    print(number, flush=True)
    time.sleep(0.01)
"""


def test_kill_9_loses_one_scan_at_most(tmp_path: Path) -> None:
    path = tmp_path / "run.sqlite"
    command = [sys.executable, "-c", textwrap.dedent(VICTIM), str(path), str(Path(__file__).parents[1])]
    with subprocess.Popen(command, stdout=subprocess.PIPE) as victim:
        assert victim.stdout is not None
        told = [int(victim.stdout.readline()) for _ in range(60)]
        os.kill(victim.pid, signal.SIGKILL)
        told += [int(line) for line in victim.stdout.read().split()]
    with JournalReader(path) as journal:
        numbers = [record.number for record in journal.scans()]
        assert "outcome" not in journal.meta
    assert numbers == list(range(1, numbers[-1] + 1))
    assert numbers[-1] >= told[-1] - 1


class _Failing(sqlite3.Connection):
    """Fails every BEGIN while ``mood`` says so."""

    mood: tuple[str, int] | None = None

    def execute(self, sql: str, *values: object) -> sqlite3.Cursor:  # type: ignore[override]
        if sql.startswith("BEGIN IMMEDIATE") and _Failing.mood is not None:
            error = sqlite3.OperationalError(_Failing.mood[0])
            error.sqlite_errorcode = _Failing.mood[1]
            raise error
        return super().execute(sql, *values)  # type: ignore[arg-type]


def failing_connect(path: Path) -> sqlite3.Connection:
    connection = sqlite3.connect(path, isolation_level=None, check_same_thread=False, factory=_Failing)
    connection.execute("PRAGMA journal_mode = WAL")
    return connection


def wait_for(condition: object, seconds: float = 5.0) -> None:
    end = time.monotonic() + seconds
    while not condition():  # type: ignore[operator]
        assert time.monotonic() < end, "waited in vain"
        time.sleep(0.01)


@pytest.mark.parametrize(
    ("text", "code", "segments"),
    [("database or disk is full", sqlite3.SQLITE_FULL, 1), ("disk I/O error", sqlite3.SQLITE_IOERR, 2)],
)
def test_a_failing_disk_is_told_at_once_and_loses_nothing_when_it_recovers(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, text: str, code: int, segments: int
) -> None:
    monkeypatch.setattr(journal_sqlite, "RETRY_S", 0.02)
    monkeypatch.setattr(_Failing, "mood", None)
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS, connect=failing_connect)
    for number in (1, 2, 3, 4):
        if number == 2:
            _Failing.mood = (text, code)
        journal.scan(number, number * S, UTC, rich_intake(number))
        journal.decided(number, *decisions(number))
        if number == 2:
            wait_for(journal.trouble)
            assert text in journal.trouble()
        if number == 3:
            _Failing.mood = None
            wait_for(lambda: not journal.trouble())
    journal.close("done")
    assert len(list(tmp_path.glob("run*.sqlite"))) >= segments
    with JournalReader(tmp_path) as reader:
        assert [record.number for record in reader.scans()] == [1, 2, 3, 4]
        assert reader.meta["outcome"] == "done"


class _Slow(sqlite3.Connection):
    """Each commit waits for its disk, as one whose fsync hangs does."""

    wait_s = 0.0

    def execute(self, sql: str, *values: object) -> sqlite3.Cursor:  # type: ignore[override]
        if sql == "COMMIT":
            time.sleep(self.wait_s)
        return super().execute(sql, *values)  # type: ignore[arg-type]


def slow_connect(path: Path) -> sqlite3.Connection:
    return sqlite3.connect(path, isolation_level=None, check_same_thread=False, factory=_Slow)


def test_a_disk_that_hangs_in_every_commit_makes_no_scan_wait(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Nobody who decides waits for the disk: a trip is as quick with an fsync of seconds as with none."""
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS, connect=slow_connect)
    monkeypatch.setattr(_Slow, "wait_s", 1.0)
    waits_s = []
    for number in range(1, 101):
        began_s = time.perf_counter()
        journal.scan(number, number * S, UTC, rich_intake(number))
        journal.decided(number, *decisions(number))
        waits_s.append(time.perf_counter() - began_s)
    assert sorted(waits_s)[95] < 0.005
    assert sum(waits_s) < 0.5  # less than one commit
    journal.close("done")
    with JournalReader(tmp_path / "run.sqlite") as reader:
        assert len(list(reader.scans())) == 100


def test_a_disk_that_stays_full_makes_closing_fail_instead_of_lying(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(journal_sqlite, "RETRY_S", 0.01)
    monkeypatch.setattr(_Failing, "mood", None)
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS, connect=failing_connect)
    _Failing.mood = ("database or disk is full", sqlite3.SQLITE_FULL)
    journal.scan(1, S, UTC, rich_intake(1))
    journal.decided(1, [], [])
    with pytest.raises(JournalError, match="disk is full"):
        journal.close("done")


def test_files_that_are_no_journal_are_refused_with_a_sentence(tmp_path: Path) -> None:
    with pytest.raises(JournalError, match="there is no journal"):
        JournalReader(tmp_path)
    garbage = tmp_path / "run.sqlite"
    garbage.write_bytes(b"not a database at all, but long enough to look at" * 50)
    with pytest.raises(JournalError, match="cannot be opened"):
        JournalReader(tmp_path)
    garbage.unlink()
    filled(garbage, 1)
    with sqlite3.connect(garbage) as connection:
        connection.execute("UPDATE meta SET value = '99' WHERE key = 'schema'")
    connection.close()
    with pytest.raises(JournalError, match="version 99"):
        JournalReader(tmp_path)


def test_a_journal_that_cannot_be_made_is_refused(tmp_path: Path) -> None:
    with pytest.raises(JournalError, match="cannot write the journal"):
        SqliteJournal(tmp_path / "missing" / "run.sqlite", {}, TAGS)


def test_an_ended_journal_is_one_file_and_reads_from_a_folder_that_cannot_be_written(tmp_path: Path) -> None:
    filled(tmp_path / "run.sqlite", 3)
    tmp_path.chmod(0o500)
    try:
        with JournalReader(tmp_path) as reader:
            assert len(list(reader.scans())) == 3
        assert [path.name for path in tmp_path.iterdir()] == ["run.sqlite"]
    finally:
        tmp_path.chmod(0o700)


def test_a_live_journal_can_be_read(tmp_path: Path) -> None:
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, TAGS)
    journal.scan(1, S, UTC, rich_intake(1))
    journal.decided(1, *decisions(1))

    def seen() -> bool:
        with JournalReader(tmp_path) as reader:
            return len(list(reader.scans())) == 1

    wait_for(seen)
    journal.close("done")


def test_export_has_units_in_the_header_and_words_for_positions(tmp_path: Path) -> None:
    journal = SqliteJournal(tmp_path / "run.sqlite", {"simulated": "yes"}, TAGS)
    phase = Event(EventKind.PHASE, "prime", 0, "Priming.", {"step": "fast", "point": "p1", "label": "prime"})
    for number in range(1, 5):
        quality = Quality.BAD if number == 3 else Quality.GOOD
        samples = (
            Sample("PT-1", number + 0.125, number * S, quality),
            Sample("V-A.position", number % 2, number * S),
        )
        journal.scan(number, number * S, UTC, Intake(samples=samples))
        journal.decided(number, [], [phase] if number == 1 else [])
    journal.close("done")
    assert export_csv(tmp_path, tmp_path / "out.csv") == 5
    with (tmp_path / "out.csv").open(newline="", encoding="utf-8") as file:
        table = list(csv.reader(file))
    assert table[0] == ["time [s]", "UTC", "simulated", "phase", "point", "PT-1 [bar]", "V-A.position"]
    assert [row[5] for row in table[1:]] == ["", "1.125", "2.125", "", "4.125"]
    assert [row[6] for row in table[1:]] == ["", "b", "a", "b", "a"]
    assert table[2][2:5] == ["yes", "prime", "p1"]
    assert events_csv(tmp_path, tmp_path / "events.csv") == 1
