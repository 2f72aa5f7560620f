"""A run folder with its journal and the frozen copies of its files."""

from __future__ import annotations

from pathlib import Path

from rigd.adapters import run_folder
from rigd.config.load import load_pair
from rigd.model.errors import ConfigError
from rigd.report.collect import read_run
from rigd.report.data import RunData


def open_run(folder: Path) -> RunData:
    """Read a run. Files that this version can no longer read are left out; a missing journal is a ``JournalError``."""
    try:
        pair = load_pair(folder / run_folder.RIG, folder / run_folder.RECIPE)
    except ConfigError:
        return read_run(folder)
    return read_run(folder, pair.rig, pair.recipe)
