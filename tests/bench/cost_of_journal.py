"""Rows per second into the run journal, beside executemany into one SQLite file with the same durability.

Same durability means: write-ahead log, whole scans per transaction, as many per transaction as the journal's writer
takes at once, forced to the medium once a second. The floor has its rows ready made and no second thread; the journal
makes its rows from samples, behind a queue, and is fed no faster than it says that its disk keeps up.
"""

from __future__ import annotations

import os
import signal
import sqlite3
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from pathlib import Path

from bench.figures import Figure, Scale, Target, median

from rigd.adapters import journal_schema as schema
from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.journal_sqlite import FORCE_S, SqliteJournal, connect
from rigd.model.intake import Intake
from rigd.model.rig import Tag, TagKind
from rigd.model.samples import Sample

S = 1_000_000_000
TAGS = 40
SCANS_PER_COMMIT = 1000
"""As many as the journal's writer takes in one transaction when it is behind."""
UTC = "2026-03-04T05:06:07.000+00:00"


def journal_figures(scale: Scale) -> Iterator[Figure]:
    """Sustained rate, and what kill -9 costs."""
    scans, rounds = scale.pick(200, 10_000, 50_000), scale.pick(1, 5, 5)
    rows = scans * (TAGS + 1)
    journal_s, floor_s = [], []
    with tempfile.TemporaryDirectory() as folder:
        for number in range(rounds):
            floor_s.append(floor_seconds(Path(folder) / f"floor-{number}.sqlite", scans))
            journal_s.append(journal_seconds(Path(folder) / f"run-{number}.sqlite", scans))
        yield Figure(
            "journal",
            "journal, sustained",
            "rows/s",
            rows / median(journal_s),
            rows / median(floor_s),
            "executemany, same durability",
            Target(ratio_min=0.5),
            f"{rows} rows, {TAGS} samples a scan; median of {rounds}",
        )
        kills = scale.pick(1, 5, 20)
        lost = [scans_lost(Path(folder) / f"kill-{number}.sqlite") for number in range(kills)]
    yield Figure(
        "journal.kill",
        "scans lost on kill -9 of the writer, worst",
        "scans",
        max(lost),
        target=Target(value_max=1),
        note=f"{kills} kills at 100 scans/s",
    )


def tags() -> tuple[Tag, ...]:
    """``TAGS`` tags."""
    return tuple(
        Tag(f"T{i}", "", TagKind.MEASURED, "pressure", "bar", 0.0, 25.0, "d", f"c{i}", S, S) for i in range(TAGS)
    )


def intake_of(number: int) -> Intake:
    """One sample of every tag."""
    return Intake(samples=tuple(Sample(f"T{i}", 1.0 + 0.001 * i, number * S // 10, raw=1000 + i) for i in range(TAGS)))


def journal_seconds(path: Path, scans: int) -> float:
    """From the first scan handed over to the file closed."""
    intakes = [intake_of(number) for number in range(scans)]
    journal = SqliteJournal(path, {}, tags())
    t0 = time.perf_counter()
    for number, intake in enumerate(intakes, 1):
        while journal.trouble():
            time.sleep(0.001)
        journal.scan(number, number * S // 10, UTC, intake)
        journal.decided(number, (), ())
    journal.close("done")
    took_s = time.perf_counter() - t0
    _check(path, scans)
    return took_s


def floor_seconds(path: Path, scans: int) -> float:
    """The floor: the same rows, made beforehand, in the same tables."""
    batches = []
    for first in range(0, scans, SCANS_PER_COMMIT):
        numbers = range(first, min(scans, first + SCANS_PER_COMMIT))
        samples = [row for number in numbers for row in _rows(number)]
        batches.append(([(number + 1, number * S // 10, UTC) for number in numbers], samples))
    connection = connect(path)
    connection.executescript(schema.TABLES)
    t0 = time.perf_counter()
    forced_s = 0.0
    for of_scans, of_samples in batches:
        force = time.monotonic() - forced_s >= FORCE_S
        forced_s = time.monotonic() if force else forced_s
        connection.execute(f"PRAGMA synchronous = {'FULL' if force else 'NORMAL'}")
        connection.execute("BEGIN IMMEDIATE")
        connection.executemany(schema.INSERT_SCAN, of_scans)
        connection.executemany(schema.INSERT_SAMPLE, of_samples)
        connection.execute("COMMIT")
    connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    connection.close()
    took_s = time.perf_counter() - t0
    _check(path, scans)
    return took_s


def _rows(number: int) -> Sequence[schema.Row]:
    return [schema.sample_row(number + 1, tag, sample) for tag, sample in enumerate(intake_of(number).samples, 1)]


def _check(path: Path, scans: int) -> None:
    connection = sqlite3.connect(path)
    found = connection.execute("SELECT (SELECT count(*) FROM scans), (SELECT count(*) FROM samples)").fetchone()
    connection.close()
    assert found == (scans, scans * TAGS), f"{path.name} holds {found}"


VICTIM = """
import sys, time
sys.path.insert(0, sys.argv[2])
from pathlib import Path
from bench.cost_of_journal import S, UTC, intake_of, tags
from rigd.adapters.journal_sqlite import SqliteJournal
journal = SqliteJournal(Path(sys.argv[1]), {}, tags())
for number in range(1, 10_000):
    journal.scan(number, number * S // 10, UTC, intake_of(number))
    journal.decided(number, (), ())
    print(number, flush=True)
    time.sleep(0.01)
"""


def scans_lost(path: Path, scans: int = 40) -> int:
    """Decided scans that are not in the file after its writer was killed."""
    command = [sys.executable, "-c", VICTIM, str(path), str(Path(__file__).resolve().parents[1])]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE) as victim:
        assert victim.stdout is not None
        told = [int(victim.stdout.readline()) for _ in range(scans)]
        os.kill(victim.pid, signal.SIGKILL)
        told += [int(line) for line in victim.stdout.read().split()]
    with JournalReader(path) as journal:
        last = max(record.number for record in journal.scans())
    return max(0, told[-1] - last)
