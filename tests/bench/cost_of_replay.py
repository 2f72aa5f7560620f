"""Deciding a run again from its journal, beside reading the same rows.

The floor walks the same rows of the same file as plain tuples. Processor time, all in one thread.
"""

from __future__ import annotations

import sqlite3
import tempfile
import time
from collections.abc import Callable, Iterator
from pathlib import Path

from bench.figures import Figure, Scale, Target, median
from bench.start_time import CONFIGS, RIG

from rigd.adapters.journal_reader import JournalReader
from rigd.app import DrySettings, dry_run
from rigd.runtime.dry import DryOptions
from rigd.runtime.recorded_run import recorded_run
from rigd.runtime.replay import replay

TABLES = ("scans", "samples", "inputs", "orders", "events")
S = 1_000_000_000


def replay_figures(scale: Scale) -> Iterator[Figure]:
    """The reader alone, and the replay shell."""
    name, limit_s = (("demo", 60), ("demo", 14_400), ("overnight", 86_400))[scale]
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "run.sqlite"
        settings = DrySettings(journal=path, options=DryOptions(limit_ns=limit_s * S))
        dry_run(RIG, CONFIGS / "recipes" / f"{name}-sweep.toml", settings)
        samples, scans = count_rows(path)
        costs: dict[str, list[float]] = {"floor": [], "load": [], "read": [], "replay": []}
        acts = {"floor": walk_rows, "load": load_run, "read": walk_scans, "replay": replay_run}
        for _ in range(scale.pick(1, 3, 3)):
            for act, do in acts.items():
                costs[act].append(_cpu_us(do, path) / samples)
    floor = median(costs["floor"])
    what = f"{name} dry run: {samples} samples in {scans} scans"
    yield Figure(
        "replay.read",
        "read a journal, scan by scan",
        "us/sample",
        median(costs["read"]),
        floor,
        "same rows, plain",
        note=what,
    )
    again = median(costs["replay"])
    yield Figure(
        "replay",
        "replay, every decision compared",
        "us/sample",
        again,
        floor,
        "same rows, plain",
        Target(ratio_max=4),
        f"no difference; {median(costs['load']) * samples / 1e6:.2f} s of it load the run's files",
    )
    yield Figure(
        "replay.rate", "replay, samples per second", "samples/s", 1e6 / again, target=Target(value_min=300_000)
    )


def count_rows(path: Path) -> tuple[int, int]:
    """Samples and scans."""
    connection = sqlite3.connect(path)
    samples, scans = connection.execute(
        "SELECT (SELECT count(*) FROM samples), (SELECT count(*) FROM scans)"
    ).fetchone()
    connection.close()
    return samples, scans


def walk_rows(path: Path) -> None:
    """The floor: every row of every table that a replay needs."""
    connection = sqlite3.connect(f"{path.as_uri()}?mode=ro", uri=True)
    for table in TABLES:
        for _ in connection.execute(f"SELECT * FROM {table}"):
            pass
    connection.close()


def load_run(path: Path) -> None:
    """What a replay does before the first scan."""
    with JournalReader(path) as journal:
        recorded_run(journal)


def walk_scans(path: Path) -> None:
    """Read all scans as values."""
    with JournalReader(path) as journal:
        for _ in journal.scans():
            pass


def replay_run(path: Path) -> None:
    """The replay shell; a run that was decided differently is no measurement."""
    found = replay(path)
    assert found.same, f"the replay differs: {found.first} {found.gap}"


def _cpu_us(act: Callable[[Path], None], path: Path) -> float:
    started_s = time.process_time()
    act(path)
    return (time.process_time() - started_s) * 1e6
