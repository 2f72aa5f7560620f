"""The record of a rig: appended, chained, and not believed when it was changed."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd.adapters.rig_records import append_record, read_records, records_path
from rigd.model.errors import JournalError
from rigd.model.records import RecordKind, RigRecord

ENTRIES = tuple(
    RigRecord(RecordKind.PROOF, f"LOCK-{n}", f"2026-05-0{n}T00:00:00+00:00", "änn", n != 2, "8.1 bar", "0 bar")
    for n in (1, 2, 3)
)


@pytest.fixture
def rig(tmp_path: Path) -> Path:
    path = tmp_path / "rig.toml"
    for entry in ENTRIES:
        append_record(path, entry)
    return path


def test_what_was_written_comes_back(rig: Path) -> None:
    assert read_records(rig) == ENTRIES
    assert records_path(rig).name == "rig.records.jsonl"
    assert read_records(rig.with_name("other.toml")) == ()


@pytest.mark.parametrize(
    ("old", "new"), [("LOCK-2", "LOCK-1"), ("8.1", "9.1"), ('\\"passed\\": false', '\\"passed\\": true')]
)
def test_a_changed_entry_is_not_believed(rig: Path, old: str, new: str) -> None:
    path = records_path(rig)
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))
    with pytest.raises(JournalError, match=r"rig\.records\.jsonl:[12]: this entry or one before it"):
        read_records(rig)


@pytest.mark.parametrize("lost", [0, 1])
def test_a_dropped_entry_is_missed(rig: Path, lost: int) -> None:
    path = records_path(rig)
    lines = path.read_text().splitlines(keepends=True)
    path.write_text("".join(lines[:lost] + lines[lost + 1 :]))
    with pytest.raises(JournalError):
        read_records(rig)


def test_a_torn_last_line_is_passed_over_and_the_next_entry_goes_on(rig: Path) -> None:
    path = records_path(rig)
    path.write_text(path.read_text()[:-40])
    assert read_records(rig) == ENTRIES[:2]
    append_record(rig, ENTRIES[0])
    assert read_records(rig) == (*ENTRIES[:2], ENTRIES[0])


def test_a_folder_that_cannot_be_written(tmp_path: Path) -> None:
    with pytest.raises(JournalError, match="cannot write"):
        append_record(tmp_path / "none" / "rig.toml", ENTRIES[0])
