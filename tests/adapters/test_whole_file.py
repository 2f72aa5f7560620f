"""Files appear whole or not at all; a journal whose log cannot be read is not shown shorter than it is."""

from __future__ import annotations

import errno
import os
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from fakes.report_run import write_run

from rigd.adapters import journal_reader
from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.whole_file import whole_files, write_whole
from rigd.model.errors import JournalError


def test_two_files_come_together_and_replace_what_was_there(tmp_path):
    one, two = tmp_path / "new" / "one", tmp_path / "new" / "two"
    with whole_files(one, two) as (first, second):
        first.write_text("1")
        assert not one.exists()
        second.write_text("2")
    assert (one.read_text(), two.read_text()) == ("1", "2")
    assert write_whole(one, "3").read_text() == "3"
    assert sorted(path.name for path in one.parent.iterdir()) == ["one", "two"]


@pytest.mark.parametrize("error", [OSError(errno.ENOSPC, "full"), KeyboardInterrupt(), ValueError()])
def test_after_any_failure_the_old_one_stands_alone(tmp_path, error):
    (tmp_path / "one").write_text("old")

    def write() -> None:
        with whole_files(tmp_path / "one", tmp_path / "two") as (first, _):
            first.write_text("half")
            raise error

    with pytest.raises(type(error)):
        write()
    assert [path.name for path in tmp_path.iterdir()] == ["one"]
    assert (tmp_path / "one").read_text() == "old"


def test_an_error_names_the_file_that_was_wanted(tmp_path):
    with pytest.raises(OSError, match="wanted") as raised, whole_files(tmp_path / "wanted") as (part,):
        raise OSError(errno.EROFS, "Read-only file system", str(part))
    assert raised.value.filename == str(tmp_path / "wanted")


DIED = """
import os, sys, time
from pathlib import Path
from fakes.report_run import write_run
run = write_run(Path(sys.argv[1]), close=False, trip_after=None)
while not (run / "run.sqlite-wal").stat().st_size:
    time.sleep(0.05)
os._exit(9)
"""


def test_a_log_that_cannot_be_read_is_said_instead_of_a_shorter_run(tmp_path, monkeypatch):
    """An archive without the log's index, in a folder where none can be made: SQLite cannot open it."""
    paths = os.pathsep.join([str(Path(__file__).parents[1]), *filter(None, [os.environ.get("PYTHONPATH")])])
    subprocess.run(
        [sys.executable, "-c", DIED, str(tmp_path / "run")], check=False, env={**os.environ, "PYTHONPATH": paths}
    )
    opened = sqlite3.connect

    def read_only_folder(name: str, **more: bool) -> sqlite3.Connection:
        if "mode=ro" in str(name):
            raise sqlite3.OperationalError("unable to open database file")
        return opened(name, **more)

    whole = write_run(tmp_path / "whole")
    with monkeypatch.context() as patch:
        patch.setattr(journal_reader.sqlite3, "connect", read_only_folder)
        with pytest.raises(JournalError, match=r"stands in run.sqlite-wal.*copy the whole folder"):
            JournalReader(tmp_path / "run")
        with JournalReader(whole) as journal:
            assert journal.span()[0] > 100
