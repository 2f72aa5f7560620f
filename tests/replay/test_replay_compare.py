"""A run decided again: the same run has no divergence, and each change of the record is found at its own place."""

from __future__ import annotations

import math
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from fakes.card_rigs import modbus_rig
from fakes.recorded import BLOCK, RECIPE, RIG, copy_of, recorded, spoilt

from rigd.adapters.journal_reader import JournalReader, ScanRecord
from rigd.app import DrySettings, dry_run
from rigd.model.errors import JournalError
from rigd.model.events import Event, EventKind
from rigd.model.intake import NOTHING as NOTHING_NEW
from rigd.ports.plant import FaultSpec
from rigd.report.open_run import open_run
from rigd.runtime.dry import DryOptions
from rigd.runtime.replay import NOTHING, difference, replay


def trips(run: Path) -> list[str]:
    with JournalReader(run) as journal:
        return [event.subject for event in journal.events(EventKind.TRIP)]


def test_a_dry_run_is_decided_again_exactly():
    found = replay(recorded())
    assert found.same
    assert found.different == 0
    assert found.end_ns == 90_000_000_000
    with JournalReader(recorded()) as journal:
        records = list(journal.scans())
    assert found.scans == len(records)
    assert found.samples == sum(len(record.intake.samples) for record in records)
    assert found.orders == sum(len(record.orders) for record in records) > 10
    assert found.events == sum(len(record.events) for record in records) > 50


def test_a_tripped_run_is_decided_again_exactly():
    assert trips(recorded(BLOCK))[0] == "PRESSURE-HIGH"
    found = replay(recorded(BLOCK))
    assert found.same
    assert not found.notes


def test_a_changed_order_is_found_at_its_scan(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        number, scan, unit, value = tables.execute(
            "SELECT number, scan, unit, value FROM orders WHERE action = 'deliver' ORDER BY rowid LIMIT 1"
        ).fetchone()
        tables.execute("UPDATE orders SET value = value + 0.001 WHERE number = ?", (number,))
    found = replay(run)
    assert found.different == 1
    assert found.first is not None
    assert (found.first.scan, found.first.what) == (scan, "order")
    assert found.first.expected.startswith(f"order {number}: {unit} deliver {value + 0.001:g}")
    assert found.first.actual.startswith(f"order {number}: {unit} deliver {value:g}")


def test_a_changed_event_is_found_at_its_scan(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        row, scan = tables.execute("SELECT rowid, scan FROM events WHERE kind = 'phase' LIMIT 1").fetchone()
        tables.execute("UPDATE events SET text = 'Somebody wrote here.' WHERE rowid = ?", (row,))
    found = replay(run)
    assert found.first is not None
    assert (found.first.scan, found.first.what, found.different) == (scan, "event", 1)
    assert "Somebody wrote here." in found.first.expected
    assert "Somebody wrote here." not in found.first.actual


def test_an_order_that_is_missing_and_one_too_many(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        row, scan = tables.execute("SELECT max(rowid), scan FROM orders").fetchone()
        tables.execute("DELETE FROM orders WHERE rowid = ?", (row,))
    first = replay(run).first
    assert first is not None
    assert (first.scan, first.expected) == (scan, NOTHING)
    with spoilt(run) as tables:
        tables.execute("UPDATE orders SET scan = scan WHERE rowid = ?", (row,))
        tables.execute("INSERT INTO orders VALUES (9999, ?, 'PU-A', 'stop', 0.0, 5, 'nobody', 0)", (scan,))
    first = replay(run).first
    assert first is not None
    assert first.expected.startswith("order 9999")


def test_a_sample_over_the_limit_makes_the_trip_appear_at_its_record(tmp_path):
    """PT-1 trips above 8 bar for 200 ms (the rig file): two samples in turn, 200 ms apart or more."""
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        ((tag,),) = tables.execute("SELECT id FROM tags WHERE tag = 'PT-1'")
        rows = tables.execute("SELECT rowid, scan, t_ns FROM samples WHERE tag = ? AND t_ns >= 60e9 LIMIT 3", (tag,))
        rows = rows.fetchall()
        tables.executemany("UPDATE samples SET value = 12.0 WHERE rowid = ?", [(row[0],) for row in rows])
    found = replay(run)
    assert found.first is not None
    assert rows[0][1] <= found.first.scan <= rows[2][1] + 1
    assert rows[0][2] <= found.first.t_ns <= rows[2][2] + 300_000_000
    assert "PRESSURE-HIGH" in found.first.actual


def test_a_run_that_died_is_compared_to_its_end_and_says_so(tmp_path):
    run = copy_of(recorded(BLOCK), tmp_path)
    with spoilt(run) as tables:
        tables.execute("DELETE FROM meta WHERE key = 'outcome'")
        ((last,),) = tables.execute("SELECT max(scan) FROM orders")
        for table, column in (("orders", "scan"), ("events", "scan"), ("samples", "scan"), ("inputs", "scan")):
            over = f"{column} {'>=' if table in ('orders', 'events') else '>'} ?"
            tables.execute(f"DELETE FROM {table} WHERE {over}", (last,))
        tables.execute("DELETE FROM scans WHERE number > ?", (last,))
    found = replay(run)
    assert found.same
    assert any("never closed" in note for note in found.notes)
    assert any(f"the decision of the last scan ({last}) was not recorded" in note for note in found.notes)


def test_a_lost_decision_in_a_run_that_was_closed_is_a_difference(tmp_path):
    run = copy_of(recorded(BLOCK), tmp_path)
    with spoilt(run) as tables:
        ((last,),) = tables.execute("SELECT max(scan) FROM orders")
        tables.execute("DELETE FROM orders WHERE scan = ?", (last,))
        tables.execute("DELETE FROM scans WHERE number > ?", (last,))
    assert not replay(run).same


def test_a_gap_ends_the_comparison_with_its_scans_named(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        for table, column in (("scans", "number"), ("orders", "scan"), ("events", "scan"), ("samples", "scan")):
            tables.execute(f"DELETE FROM {table} WHERE {column} BETWEEN 101 AND 120")
    found = replay(run)
    assert not found.same
    assert found.scans == 100
    assert "lacks scans 101 to 120" in found.gap


def test_not_a_number_in_the_data_is_compared_like_any_value():
    """A broken wire reads as no number at all; the same on both sides, in samples and in the fields of events."""
    run = recorded(FaultSpec("open", "TT-1", onset_s=40.0))
    with JournalReader(run) as journal:
        last = journal.series("TT-1").values[-1]
        told = [event for event in journal.events() if "TT-1" in event.text]
    assert math.isnan(last)
    assert told
    assert replay(run).same


def test_not_a_number_in_an_event_is_equal_to_itself():
    def scan(value: float) -> ScanRecord:
        return ScanRecord(1, 0, "", NOTHING_NEW, (), (Event(EventKind.NOTE, "PT-1", 0, "x", {"value": value}),))

    assert difference(scan(math.nan), (), scan(float("nan")).events) is None
    assert difference(scan(math.nan), (), scan(1.0).events) is not None


def test_another_version_of_the_program_is_said(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        tables.execute("UPDATE meta SET value = '0.0.7' WHERE key = 'version'")
        tables.execute("UPDATE meta SET value = 'other' WHERE key = 'rig_digest'")
    found = replay(run)
    assert found.same
    assert any("recorded by rigd 0.0.7" in note for note in found.notes)
    assert any("rig file differently" in note for note in found.notes)


def test_another_build_of_the_same_version_is_said(tmp_path):
    run = copy_of(recorded(), tmp_path)
    assert not replay(run).notes
    with spoilt(run) as tables:
        tables.execute("UPDATE meta SET value = 'abc' WHERE key = 'core'")
    assert any("another build" in note for note in replay(run).notes)


def test_the_options_of_the_run_are_those_that_were_recorded(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        tables.execute(
            "UPDATE meta SET value = json_set(value, '$.collected', json('[\"P01\"]'), '$.unattended', json('true'), "
            "'$.stale_floor_ns', 123) WHERE key = 'options'"
        )
    options = replay(run).recorded.program.options
    assert (options.collected, options.unattended, options.stale_floor_ns) == (("P01",), True, 123)


@pytest.mark.parametrize(
    ("change", "says"),
    [
        ("DELETE FROM meta WHERE key = 'rig.toml'", "holds no rig.toml"),
        ("DELETE FROM meta WHERE key = 'recipe.toml'", "holds no recipe.toml"),
        ("DELETE FROM meta WHERE key = 'options'", "does not tell the options"),
        ("UPDATE meta SET value = '{\"lunch\": 1}' WHERE key = 'options'", "option 'lunch'"),
        ("UPDATE meta SET value = '{' WHERE key = 'options'", "damaged"),
        ("UPDATE meta SET value = 'schema = 3' WHERE key = 'rig.toml'", "cannot read the files with which"),
        ("UPDATE meta SET value = '9' WHERE key = 'schema'", "schema is version 9, this program reads version 1"),
        ("DELETE FROM meta WHERE key = 'schema'", "schema is version none"),
        ("DELETE FROM scans", "holds no scan"),
        ("DROP TABLE samples", "damaged"),
        ("UPDATE events SET fields = '{' WHERE rowid = 5", "damaged"),
        ("UPDATE events SET kind = 'picnic' WHERE rowid = 5", "damaged"),
        ("UPDATE samples SET tag = 999 WHERE rowid = 7", "damaged"),
        ("UPDATE inputs SET body = '[1]' WHERE rowid = 1", "damaged"),
    ],
)
def test_a_journal_that_cannot_be_decided_again_says_why(tmp_path, change, says):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        tables.execute(change)
    with pytest.raises(JournalError, match=says):
        replay(run)


def test_the_copies_beside_an_older_journal_are_used(tmp_path):
    run = copy_of(recorded(), tmp_path)
    with spoilt(run) as tables:
        texts = dict(tables.execute("SELECT key, value FROM meta WHERE key LIKE '%.toml'"))
        tables.execute("DELETE FROM meta WHERE key LIKE '%.toml'")
    for name, text in texts.items():
        (run / name).write_text(text, encoding="utf-8")
    assert replay(run).same


def test_a_file_cut_short_or_no_database_at_all(tmp_path):
    run = copy_of(recorded(), tmp_path)
    journal = run / "run.sqlite"
    whole = journal.read_bytes()
    journal.write_bytes(whole[: len(whole) // 2])
    with pytest.raises(JournalError, match=r"damaged|cannot be"):
        replay(run)
    for content in (b"", b"not a database at all, but a letter" * 100):
        journal.write_bytes(content)
        with pytest.raises(JournalError):
            replay(run)
    journal.unlink()
    with pytest.raises(JournalError, match="there is no journal"):
        replay(run)


def test_the_record_is_not_changed_by_a_replay(tmp_path):
    run = copy_of(recorded(), tmp_path)
    before = (run / "run.sqlite").read_bytes()
    os.chmod(run / "run.sqlite", 0o400)
    os.chmod(run, 0o500)
    try:
        assert replay(run).same
        assert (run / "run.sqlite").read_bytes() == before
        assert [path.name for path in run.iterdir()] == ["run.sqlite"]
    finally:
        os.chmod(run, 0o700)


@pytest.mark.slow
@pytest.mark.timeout(180)
def test_a_run_killed_with_no_warning_has_no_divergence(tmp_path):
    command = [sys.executable, "-m", "rigd", "dry-run", str(RIG), str(RECIPE), "--out", str(tmp_path / "run")]
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    journal = tmp_path / "run" / "run.sqlite"
    try:
        while not scans_in(journal) > 2000:
            assert process.poll() is None, "the run ended before it could be killed"
            time.sleep(0.05)
    finally:
        process.send_signal(signal.SIGKILL)
        process.wait()
    found = replay(tmp_path / "run")
    assert found.same
    assert found.scans > 2000
    assert any("never closed" in note for note in found.notes)


def scans_in(journal: Path) -> int:
    try:
        with JournalReader(journal) as reader:
            return reader.span()[0]
    except JournalError:
        return 0


def test_a_run_with_cards_finds_them_in_its_journal_and_nothing_leads_out_of_the_folder(tmp_path):
    (tmp_path / "files").mkdir()
    rig, recipe = modbus_rig(tmp_path / "files", 5020)
    run = tmp_path / "run"
    run.mkdir()
    options = DryOptions(limit_ns=5_000_000_000)
    dry_run(rig, recipe, DrySettings(journal=run / "run.sqlite", options=options))
    with spoilt(run) as tables:
        tables.execute("INSERT INTO meta VALUES ('../outside.toml', 'x')")
    shutil.rmtree(tmp_path / "files")
    found = replay(run)
    assert found.same
    assert not found.notes
    assert open_run(run).rig is not None
    assert not list(tmp_path.rglob("outside.toml"))
