"""A run folder with its journal and the frozen copies of its files."""

from __future__ import annotations

import tempfile
from pathlib import Path

from rigd.adapters import run_folder
from rigd.adapters.journal_reader import JournalReader
from rigd.config.load import load_pair
from rigd.model.errors import ConfigError
from rigd.report.collect import read_run
from rigd.report.data import RunData


def open_run(folder: Path) -> RunData:
    """Read a run. Its files are those in the journal, else the copies beside it; files that this version can no
    longer read are left out; a missing journal is a ``JournalError``."""
    with JournalReader(folder) as journal:
        texts = run_folder.texts_in(journal.meta)
    if run_folder.RIG not in texts:
        return _read(folder, folder)
    with tempfile.TemporaryDirectory(prefix="rigd-") as copies:
        run_folder.write_texts(Path(copies), texts)
        return _read(folder, Path(copies))


def _read(folder: Path, files: Path) -> RunData:
    try:
        pair = load_pair(files / run_folder.RIG, files / run_folder.RECIPE)
    except ConfigError:
        return read_run(folder)
    return read_run(folder, pair.rig, pair.recipe)
