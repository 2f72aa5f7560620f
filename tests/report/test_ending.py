"""How a run ended, as the report and the list tell it: by its own word, by the guard's, still running, or unknown."""

from __future__ import annotations

import json
import os
from dataclasses import replace

import pytest
from fakes.recorded import spoilt
from fakes.report_run import invented_recipe, invented_rig, write_run

from rigd.adapters.places import Daemon, announce
from rigd.console.cli import call
from rigd.model.events import Event, EventKind
from rigd.report.collect import read_run
from rigd.report.ending import GUARDED, LOOSE, RUNNING, UNFINISHED, ending, guard_words
from rigd.report.foreseen import foreseen
from rigd.report.points import point_rows
from rigd.report.summary import summary
from rigd.report.words import followers_words, outcome_words, points_words, trip_groups

TOLD = {
    "why": "control ended without a word",
    "utc": "2030-01-01T01:02:03.004+00:00",
    "seconds": 0.31,
    "devices": {
        "pump-a": {"confirmed": True, "attempts": 1, "detail": ""},
        "pump-b": {"confirmed": False, "attempts": 9, "detail": "/dev/x: no good answer, heard b''"},
    },
}


@pytest.fixture
def torn(tmp_path, monkeypatch):
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path / "rt"))
    run = write_run(tmp_path / "runs" / "torn", trip_after=0)
    with spoilt(run) as tables:
        tables.execute("DELETE FROM meta WHERE key = 'outcome'")
    return run


def all_confirmed() -> dict[str, object]:
    return {**TOLD, "devices": {name: {"confirmed": True} for name in ("pump-a", "pump-b")}}


def test_what_the_guard_did_is_quoted_when_why_and_who_confirmed(torn, capsys):
    (torn / "guard.json").write_text(json.dumps(all_confirmed()))
    run = read_run(torn, invented_rig(), invented_recipe())
    assert run.outcome == GUARDED
    for words in ("2030-01-01 01:02:03 UTC", "control ended without a word", "0.31 s: pump-a, pump-b"):
        assert words in run.outcome_text
    assert call(["runs", "--runs", str(torn.parent)]) == 0
    assert "Stopped by the guard" in " ".join(capsys.readouterr().out.split())


def test_a_device_that_did_not_confirm_is_shouted(torn):
    (torn / "guard.json").write_text(json.dumps(TOLD))
    run = read_run(torn, invented_rig(), invented_recipe())
    assert run.outcome == LOOSE
    assert outcome_words(run) == "NOT CONFIRMED AS STOPPED"
    assert "NOT CONFIRMED as stopped: pump-b (pump-b: /dev/x: no good answer" in run.outcome_text
    assert "confirmed within 0.31 s: pump-a." in run.outcome_text


def test_a_run_that_said_its_end_keeps_its_outcome_beside_the_guards_word(tmp_path):
    (tmp_path / "guard.json").write_text(json.dumps(TOLD))
    found = ending(tmp_path, {"outcome": "tripped", "end": "Tripped by X."})
    assert found.outcome == "tripped"
    assert found.text.startswith("Tripped by X. The guard took over")


@pytest.mark.parametrize("broken", ["", "[]", "{", '{"devices": 3}', '{"why": "control died"}'])
def test_a_broken_record_of_the_guard_breaks_nothing(torn, broken):
    (torn / "guard.json").write_text(broken)
    assert ending(torn, {}).outcome in (UNFINISHED, GUARDED)


def test_a_run_that_goes_on_is_running_and_then_unfinished(torn, capsys):
    told = announce(Daemon(os.getpid(), "two-pumps", torn.name, str(torn.resolve()), str(torn / "door")))
    assert read_run(torn).outcome == RUNNING
    assert call(["runs", "--runs", str(torn.parent), "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["runs"][0]["outcome"] == "running"
    told.unlink()
    assert read_run(torn).outcome == UNFINISHED


def test_the_daemons_last_sentence_is_told(tmp_path):
    found = ending(tmp_path, {"outcome": "done", "end": "Every pump is confirmed stopped."})
    assert (found.outcome, found.text) == ("done", "Every pump is confirmed stopped.")


def test_a_resumed_run_counts_what_the_earlier_one_collected(tmp_path):
    run = read_run(write_run(tmp_path / "late", trip_after=2), invented_rig(), invented_recipe())
    assert points_words(run) == "2 of 6 points collected"
    again = replace(run, facts={**run.facts, "collected": '["P5", "P6"]', "earlier": "20300101T000000Z-sweep"})
    assert points_words(again) == "4 of 6 points collected (2 of them by 20300101T000000Z-sweep)"
    same = replace(run, facts={**run.facts, "collected": json.dumps([run.points[0].id])})
    assert points_words(same) == "2 of 6 points collected"


def test_a_point_that_the_run_left_is_cut_short_and_not_called_unsteady(tmp_path):
    run = read_run(write_run(tmp_path / "cut", trip_after=2), invented_rig(), invented_recipe())
    started = Event(EventKind.POINT, "P3", run.events[-1].t_ns, "P3 begins.", {"status": "started", "kind": "point"})
    (row,) = point_rows((started,), run.traces, run.rig, run.recipe)
    assert row.cut_short
    assert not any(point.cut_short for point in run.points)
    assert foreseen(replace(run, events=(), points=(row, replace(run.points[0], settled=False)))) == [
        "P3 would be cut short",
        "P1 would not be steady in its time",
    ]


def trip(name: str, first: str, t_ns: int) -> Event:
    return Event(EventKind.TRIP, name, t_ns, f"{name} tripped.", {"first_out": first})


def test_trips_that_follow_stand_under_their_first_out(tmp_path, capsys):
    bus = [trip("LINK", "LINK", 10), trip("P-STALE", "LINK", 10), trip("T-STALE", "LINK", 1_500_000_010)]
    later = [trip("HOT", "HOT", 60_000_000_000)]
    groups = trip_groups([*bus, *later])
    assert groups == [(bus[0], bus[1:]), (later[0], [])]
    assert followers_words(*groups[0]) == "2 more followed within 1.5 s: P-STALE, T-STALE"
    assert followers_words(*groups[1]) == ""
    run = read_run(write_run(tmp_path / "trip", trip_after=1), invented_rig(), invented_recipe())
    from rich.console import Console

    console = Console(width=120)
    console.print(summary(replace(run, events=(*bus, *later))))
    shown = capsys.readouterr().out
    assert shown.count("first-out") == 2
    assert "2 more followed" in shown


def test_the_words_need_nothing():
    assert guard_words({}) == "The guard took over, because control failed."
