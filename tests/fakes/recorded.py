"""Short recorded runs of the example rig, made once, and copies of them to be spoilt."""

from __future__ import annotations

import shutil
import sqlite3
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from functools import cache
from pathlib import Path

from rigd.app import DrySettings, dry_run
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
S = 1_000_000_000
BLOCK = FaultSpec("block", "L-4", onset_s=20.0)


@cache
def recorded(*faults: FaultSpec, limit_s: int = 90) -> Path:
    """The folder of a dry run of the demo that was ended after ``limit_s`` of process time. Never change it."""
    folder = Path(tempfile.mkdtemp(prefix="rigd-recorded-"))
    options = DryOptions(limit_ns=limit_s * S)
    dry_run(RIG, RECIPE, DrySettings(faults=faults, journal=folder / "run.sqlite", options=options))
    return folder


def copy_of(run: Path, folder: Path) -> Path:
    """A run that may be spoilt, in ``folder``."""
    target = folder / "copy"
    shutil.copytree(run, target)
    return target


@contextmanager
def spoilt(run: Path) -> Iterator[sqlite3.Connection]:
    """The tables of a copy, to write in."""
    connection = sqlite3.connect(run / "run.sqlite")
    try:
        with connection:
            yield connection
    finally:
        connection.close()
