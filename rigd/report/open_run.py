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

FILES = (run_folder.RIG, run_folder.CHEMISTRY, run_folder.RECIPE)


def open_run(folder: Path) -> RunData:
    """Read a run. Its files are those beside the journal, else the copies inside it; files that this version can no
    longer read are left out; a missing journal is a ``JournalError``."""
    if (folder / run_folder.RIG).is_file():
        return _read(folder, folder)
    with JournalReader(folder) as journal:
        texts = {name: journal.meta[name] for name in FILES if name in journal.meta}
    with tempfile.TemporaryDirectory(prefix="rigd-") as copies:
        for name, text in texts.items():
            (Path(copies) / name).write_text(text, encoding="utf-8")
        return _read(folder, Path(copies))


def _read(folder: Path, files: Path) -> RunData:
    try:
        pair = load_pair(files / run_folder.RIG, files / run_folder.RECIPE)
    except ConfigError:
        return read_run(folder)
    return read_run(folder, pair.rig, pair.recipe)
