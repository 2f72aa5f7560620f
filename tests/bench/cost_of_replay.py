"""Reading a journal and deciding again, beside reading the same rows.

There is no replay shell yet. What is measured is its work: the journal reader feeds the core, and every order and event
is compared with the record. The floor walks the same rows of the same file.
"""

from __future__ import annotations

import sqlite3
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

from bench.figures import Figure, Scale, Target, median
from bench.start_time import CONFIGS, RIG

from rigd.adapters.journal_reader import JournalReader
from rigd.app import DrySettings, dry_run
from rigd.logic import scan
from rigd.logic.program import Program
from rigd.runtime.dry import DryOptions

TABLES = ("scans", "samples", "inputs", "orders", "events")
S = 1_000_000_000


def replay_figures(scale: Scale) -> Iterator[Figure]:
    """The reader alone, and reader and core."""
    name, limit_s = (("demo", 60), ("demo", 3600), ("overnight", 43_200))[scale]
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "run.sqlite"
        program = journaled_run(path, name, limit_s)
        rounds = scale.pick(1, 3, 3)
        floor, read, again = [], [], []
        for _ in range(rounds):
            t0 = time.perf_counter()
            samples = walk_rows(path)
            t1 = time.perf_counter()
            scans = walk_scans(path)
            t2 = time.perf_counter()
            different = decide_again(path, program)
            t3 = time.perf_counter()
            for kept, took_s in ((floor, t1 - t0), (read, t2 - t1), (again, t3 - t2)):
                kept.append(took_s * 1e6 / samples)
    what = f"{name} dry run: {samples} samples in {scans} scans"
    yield Figure(
        "replay.read", "read a journal, scan by scan", "us/sample", median(read), median(floor), "same rows, plain",
        note=what,
    )  # fmt: skip
    yield Figure(
        "replay",
        "replay: read and decide again",
        "us/sample",
        median(again),
        median(floor),
        "same rows, plain",
        Target(ratio_max=4),
        f"replay shell not built yet: reader + core, {different} of {scans} scans decided differently",
    )
    yield Figure(
        "replay.rate", "replay, samples per second", "samples/s", 1e6 / median(again), target=Target(value_min=300_000),
        note="replay shell not built yet: reader + core",
    )  # fmt: skip


def journaled_run(path: Path, recipe: str, limit_s: int) -> Program:
    """Rehearse a recipe with a journal; its program."""
    settings = DrySettings(journal=path, options=DryOptions(limit_ns=limit_s * S))
    return dry_run(RIG, CONFIGS / "recipes" / f"{recipe}-sweep.toml", settings).program


def walk_rows(path: Path) -> int:
    """The floor: every row of every table that a replay needs; how many samples there are."""
    connection = sqlite3.connect(f"{path.as_uri()}?mode=ro", uri=True)
    count = 0
    for table in TABLES:
        rows = 0
        for _ in connection.execute(f"SELECT * FROM {table}"):
            rows += 1
        count = rows if table == "samples" else count
    connection.close()
    return count


def walk_scans(path: Path) -> int:
    """Read all scans as values; how many there are."""
    with JournalReader(path) as journal:
        return sum(1 for _ in journal.scans())


def decide_again(path: Path, program: Program) -> int:
    """Feed the record to the core; how many scans were decided differently."""
    state = scan.initial(program, 0)
    different = 0
    with JournalReader(path) as journal:
        for record in journal.scans():
            step = scan.scan(program, state, record.intake, record.now_ns)
            state = step.state
            different += (step.orders, step.events) != (record.orders, record.events)
    return different
