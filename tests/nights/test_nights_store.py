"""Finished nights are kept whatever happens to the rest."""

from __future__ import annotations

import json
from pathlib import Path

import pyarrow.parquet as pq
import pytest

from rigd.model.errors import RigError
from rigd.nights.store import LINES, NightStore
from rigd.nights.summary import summarise


def row(night: int, **more: object) -> dict[str, object]:
    return {"night": night, "seed": night, "outcome": "done", "points": 2, "collected": 2, **more}


def test_a_store_goes_on_where_it_was_left(tmp_path: Path) -> None:
    first = NightStore(tmp_path, "test", "abc")
    first.add(row(2))
    first.add(row(1))
    again = NightStore(tmp_path, "test", "abc")
    assert [r["night"] for r in again.in_order()] == [1, 2]


def test_a_torn_last_line_is_dropped_and_the_night_done_again(tmp_path: Path) -> None:
    store = NightStore(tmp_path, "test", "abc")
    store.add(row(1))
    with (tmp_path / LINES).open("ab") as file:
        file.write(b'{"night": 2, "outc')
    again = NightStore(tmp_path, "test", "abc")
    assert list(again.rows) == [1]
    again.add(row(2))
    assert list(NightStore(tmp_path, "test", "abc").rows) == [1, 2]


def test_another_campaign_is_not_overwritten(tmp_path: Path) -> None:
    NightStore(tmp_path, "first", "abc").add(row(1))
    before = (tmp_path / LINES).read_bytes()
    with pytest.raises(RigError, match=r"another campaign .*'first'.*--out"):
        NightStore(tmp_path, "second", "def")
    assert (tmp_path / LINES).read_bytes() == before


def test_a_full_disk_keeps_what_was_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import os

    store = NightStore(tmp_path, "test", "abc")
    store.add(row(1))
    before = (tmp_path / LINES).read_bytes()

    def full(_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(RigError, match="No space left on device"):
        store.add(row(2))
    assert (tmp_path / LINES).read_bytes() == before


def test_the_table_has_a_row_a_night_and_a_column_a_result(tmp_path: Path) -> None:
    store = NightStore(tmp_path, "test", "abc")
    store.add(row(2, duration_s=20.0))
    store.add(row(1, duration_s=10.0, first_out="PRESSURE-HIGH"))
    table = pq.read_table(store.write_table()).to_pydict()
    assert table["night"] == [1, 2]
    assert table["duration_s"] == [10.0, 20.0]
    assert table["first_out"] == ["PRESSURE-HIGH", None]


def test_summary_counts_ends_and_finds_what_matters() -> None:
    rows = [
        row(i, duration_s=100.0 + 10.0 * i, **{"vary.recipe.a": float(i), "vary.recipe.b": float(i * 7 % 10)})
        for i in range(1, 21)
    ]
    rows[3] |= {"outcome": "tripped", "collected": 1, "first_out": "BED-HOT"}
    rows[4] |= {"outcome": "refused", "text": "x: y"}
    told = summarise("test", "random", 20, rows, {})
    assert told.finishes is not None
    assert (told.finishes.hits, told.finishes.nights) == (18, 20)
    assert dict(told.outcomes) == {"done": 18, "tripped": 1, "refused": 1}
    assert told.first_outs == (("BED-HOT", 1),)
    (duration,) = [r for r in told.results if r.column == "duration_s"]
    assert duration.influences[0].what == "recipe.a"
    assert duration.influences[0].rank == pytest.approx(1.0)


def test_lines_are_json(tmp_path: Path) -> None:
    NightStore(tmp_path, "test", "abc").add(row(1, text="°C"))
    lines = (tmp_path / LINES).read_text(encoding="utf-8").splitlines()
    assert json.loads(lines[0]) == {"campaign": "test", "digest": "abc"}
    assert json.loads(lines[1])["text"] == "°C"
