"""``rigd runs verify``: exit codes, words and JSON."""

from __future__ import annotations

import json
import sqlite3
from pathlib import Path

import pytest
from fakes.journal_rows import filled

from rigd.adapters.journal_verify import verify
from rigd.console.cli import call


@pytest.fixture
def run(tmp_path: Path) -> Path:
    """A closed run in a folder of runs."""
    folder = tmp_path / "runs" / "20260101T000000Z-x"
    folder.mkdir(parents=True)
    filled(folder / "run.sqlite")
    return folder


def test_a_whole_record(run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    head = verify(run).head
    assert call(["runs", "verify", str(run), "--head", head]) == 0
    told = capsys.readouterr().out
    assert "intact" in told
    assert head in told.replace("\n", "")
    assert "the head given stands in it" in told
    assert call(["runs", "--runs", str(run.parent), "verify"]) == 0


def test_a_record_that_was_changed(run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with sqlite3.connect(run / "run.sqlite") as connection:
        connection.execute("UPDATE samples SET value = 2.0 WHERE rowid = 2")
    assert call(["runs", "verify", str(run), "--json"]) == 1
    facts = json.loads(capsys.readouterr().out)
    assert facts["finding"] == "tampered"
    assert "samples" in facts["words"]


def test_a_head_from_elsewhere_that_is_not_in_it(run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert call(["runs", "verify", str(run), "--head", "ab" * 32]) == 1
    assert "the head given is not in it" in capsys.readouterr().out


def test_a_file_cut_short(run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = run / "run.sqlite"
    path.write_bytes(path.read_bytes()[:-5000])
    assert call(["runs", "verify", str(run)]) == 2
    assert "bytes are missing at its end" in capsys.readouterr().out.replace("\n", " ")


def test_the_list_is_as_before(run: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert call(["runs", "--runs", str(run.parent), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["runs"][0]["run"] == run.name
