"""A run for a notebook: tables, units, spans, the overview by the minute, Parquet."""

from __future__ import annotations

import errno
import json
import math
import sqlite3
import subprocess
import sys

import numpy as np
import pyarrow.parquet as pq
import pytest
from fakes.recorded import BLOCK, S, copy_of, recorded, spoilt
from fakes.report_run import write_run

import rigd
from rigd.adapters import journal_sqlite
from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.open_run import Table, open_run
from rigd.console.cli import call
from rigd.model.errors import JournalError
from rigd.model.intake import Intake
from rigd.model.rig import Tag, TagKind
from rigd.model.samples import Quality, Sample


def test_import_rigd_stays_light_and_open_run_is_found():
    code = "import sys, rigd; print('numpy' in sys.modules, 'sqlite3' in sys.modules); print(callable(rigd.open_run))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["False", "False", "True"]
    with pytest.raises(AttributeError, match="lunch"):
        rigd.lunch  # noqa: B018


def test_samples_are_those_of_the_journal_with_their_unit():
    with JournalReader(recorded()) as journal:
        series = journal.series("PT-1")
    with open_run(recorded()) as run:
        table = run.samples("PT-1")
        assert table.units == {"t_s": "s", "value": "bar", "quality": ""}
        assert table.rows == len(series.t_ns) > 100
        assert np.array_equal(table["value"], np.array(series.values), equal_nan=True)
        part = run.samples("PT-1", 30.0, 40.0)
        inside = [t_ns / 1e9 for t_ns in series.t_ns if 30 * S <= t_ns <= 40 * S]
        assert part["t_s"].tolist() == inside
        assert "value [bar]" in part.with_units()
        with pytest.raises(KeyError):
            run.samples("PT-99")
        assert "two-pump-column" in repr(run)


def test_a_wide_table_holds_the_last_value_at_each_time():
    with open_run(recorded()) as run:
        table = run.wide(every_s=5.0)
        seen = run.samples("PT-1")
    assert table.rows == 19
    assert table.units["PT-1"] == "bar"
    for t_s, value in zip(table["t_s"], table["PT-1"], strict=True):
        assert value == seen["value"][seen["t_s"] <= t_s][-1]


def test_events_and_orders():
    with open_run(recorded(BLOCK)) as run:
        trips, orders = run.events("trip"), run.orders()
    assert trips["subject"][0] == "PRESSURE-HIGH"
    assert json.loads(trips["fields"][0])["first_out"]
    assert set(orders["action"]) >= {"deliver", "stop"}
    assert orders.rows > 10


def test_the_overview_is_what_the_samples_say(tmp_path):
    """Also for a run that died before the last minutes were added up, and for a journal from before there were any."""
    run = copy_of(recorded(), tmp_path)
    for change in (
        "",
        "UPDATE meta SET value = '0' WHERE key = 'minutes_up_to'; DELETE FROM minutes",
        "DROP TABLE minutes",
    ):
        with spoilt(run) as tables:
            tables.executescript(change if "DROP" not in change else f"DROP VIEW overview; {change}")
        with open_run(run) as opened:
            for tag in ("PT-1", "TT-1", "PU-A.flow"):
                seen, minutes = opened.samples(tag), opened.overview(tag)
                assert minutes["t_s"].tolist() == [0.0, 60.0]
                for row, start_s in enumerate(minutes["t_s"]):
                    inside = (seen["t_s"] >= start_s) & (seen["t_s"] < start_s + 60) & (seen["quality"] < 2)
                    values = seen["value"][inside]
                    assert minutes["number"][row] == len(values)
                    assert minutes["low"][row] == values.min()
                    assert minutes["high"][row] == values.max()
                    assert minutes["mean"][row] == pytest.approx(values.mean())


TAG = Tag("T", "", TagKind.MEASURED, "pressure", "bar", 0.0, 25.0, "d", "c", S, S)


def test_the_overview_adds_up_over_several_commits_and_leaves_bad_values_out(tmp_path, monkeypatch):
    monkeypatch.setattr(journal_sqlite, "COUNT_S", 0.0)
    journal = SqliteJournal(tmp_path / "run.sqlite", {}, (TAG,))
    for number in range(1, 121):
        quality = Quality.BAD if number % 10 == 0 else Quality.GOOD
        value = math.nan if number % 20 == 0 else float(number)
        journal.scan(number, number * S, "", Intake(samples=(Sample("T", value, number * S, quality),)))
        journal.decided(number, (), ())
        while journal._queue.qsize() > 20:
            pass
    journal.close("done")
    with open_run(tmp_path) as run:
        minutes = run.overview("T")
    assert minutes["number"].tolist() == [54, 54, 0]
    assert minutes["low"].tolist()[:2] == [1.0, 61.0]
    assert minutes["high"].tolist()[:2] == [59.0, 119.0]
    assert math.isnan(minutes["mean"][2])
    assert minutes["worst"].tolist() == [2, 2, 2]
    good = [n for n in range(60, 120) if n % 10]
    assert minutes["mean"][1] == pytest.approx(sum(good) / len(good))


def test_a_span_costs_the_same_in_a_long_run(tmp_path):
    """Counted in steps of SQLite's machine, not in time: ten times as many rows cost a few more look-ups."""
    steps = []
    for scans in (2_000, 20_000):
        path = tmp_path / f"{scans}.sqlite"
        SqliteJournal(path, {}, (TAG,)).close("done")
        with sqlite3.connect(path) as tables:
            numbers = range(1, scans + 1)
            tables.executemany("INSERT INTO scans VALUES (?, ?, '')", ((n, n * S) for n in numbers))
            rows = ((n, n * S, 0.5 * n) for n in numbers)
            tables.executemany("INSERT INTO samples VALUES (?, 1, ?, ?, 0, 0, NULL)", rows)
        tables.close()
        ticks = []
        with open_run(path) as run:
            run._journal._segments[0].set_progress_handler(lambda ticks=ticks: ticks.append(1), 10)
            assert run.samples("T", 1000.0, 1009.0)["value"].tolist() == [0.5 * n for n in range(1000, 1010)]
        steps.append(len(ticks))
    assert steps[1] < 1.5 * steps[0]


def test_points_are_rows_with_units(tmp_path):
    with open_run(write_run(tmp_path / "swept", trip_after=2)) as run:
        table = run.points()
    assert list(table["point"]) == ["P1", "P2"]
    assert list(table["status"]) == ["collected", "collected"]
    assert table["collected_mL"] == pytest.approx([4.0 * 40 / 60, 4.0 * 40 / 60], rel=0.5)
    assert table["residence_time_s"][0] == pytest.approx(29.4, abs=0.5)
    assert (table.units["collected_mL"], table.units["settle_s"], table.units["status"]) == ("mL", "s", "")
    with open_run(recorded()) as run:
        assert run.points().rows == 0


def test_parquet_holds_every_sample_exactly(tmp_path, capsys):
    assert call(["export", str(recorded()), "--parquet", "--out", str(tmp_path), "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    table = pq.read_table(tmp_path / "samples.parquet")
    with JournalReader(recorded()) as journal:
        wanted = [(r.number, s.t_ns, s.tag, s.value) for r in journal.scans() for s in r.intake.samples]
    assert facts["samples"]["rows"] == table.num_rows == len(wanted)
    found = zip(*(table.column(name).to_pylist() for name in ("scan", "t_ns", "tag", "value")), strict=True)
    assert repr(list(found)) == repr(wanted)
    assert table.schema.metadata[b"rigd.rig"] == b"two-pump-column"
    assert pq.read_table(tmp_path / "events.parquet").num_rows == facts["events"]["rows"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["events.parquet", "samples.parquet"]


def test_a_full_disk_leaves_the_old_file_and_nothing_half_written(tmp_path, capsys, monkeypatch):
    (tmp_path / "samples.parquet").write_bytes(b"the old one")

    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(pq.ParquetWriter, "write_table", full)
    assert call(["export", str(recorded()), "--parquet", "--out", str(tmp_path)]) == 2
    assert "No space left" in " ".join(capsys.readouterr().err.split())
    assert [path.name for path in tmp_path.iterdir()] == ["samples.parquet"]
    assert (tmp_path / "samples.parquet").read_bytes() == b"the old one"


def test_without_pyarrow_the_extra_is_named(tmp_path, capsys, monkeypatch):
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    assert call(["export", str(recorded()), "--parquet", "--out", str(tmp_path)]) == 1
    assert "rigd[parquet]" in " ".join(capsys.readouterr().err.split())
    assert call(["export", str(recorded()), "--parquet", "--csv"]) == 2


def test_no_run_is_a_journal_error(tmp_path):
    with pytest.raises(JournalError, match="there is no journal"):
        open_run(tmp_path)


def test_an_empty_table_has_no_rows():
    assert Table({}).rows == 0
