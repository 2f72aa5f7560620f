"""The view of a rehearsal: bars lie where the phases lay, fillings are counted in their phase, peaks meet ratings."""

from __future__ import annotations

from dataclasses import replace
from io import StringIO

import pytest
from fakes.report_run import invented_recipe, invented_rig, write_run
from rich.console import Console

from rigd.console.timeline import bar, rehearsal_view, stretches
from rigd.logic.planning import Plan
from rigd.model.events import Event, EventKind
from rigd.model.problems import Problem, Severity
from rigd.report.collect import read_run
from rigd.report.data import PhaseSpan
from rigd.report.foreseen import foreseen

PLAN = Plan((), 100.0, {}, 0, 0.0, 0.0)


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    return read_run(write_run(tmp_path_factory.mktemp("runs") / "full"), invented_rig(), invented_recipe())


@pytest.mark.parametrize(
    ("start_s", "end_s", "shown"),
    [(0, 50, "██··"), (50, 100, "··██"), (99, 100, "···█"), (0, 1, "█···"), (100, 100, "···█")],
)
def test_a_bar_lies_where_its_phase_lay(start_s, end_s, shown):
    assert bar(start_s, end_s, 100, 4) == shown


def test_steps_of_one_phase_are_one_stretch_and_fillings_belong_to_theirs(run):
    spans = tuple(PhaseSpan(name, name, "", a, b) for name, a, b in [("x", 0, 5), ("x", 5, 9), ("y", 9, 20)])
    fills = [Event(EventKind.REFILL, "PU-A", int(t * 1e9), "", {"status": "done"}) for t in (6.0, 9.0, 10.0)]
    change = Event(EventKind.REFILL, "PU-A", 7_000_000_000, "", {"status": "changed over"})
    found = stretches(replace(run, phases=spans, events=(*fills, change)))
    assert [(one.id, one.start_s, one.end_s, one.refills) for one in found] == [("x", 0, 9, 1), ("y", 9, 20, 2)]


def test_peaks_stand_beside_limit_and_rating(run):
    assert run.rig is not None
    tag = next(tag for tag in run.rig.tags if tag.measures == "pressure")
    rated = replace(tag, rating=20.0)
    run = replace(run, rig=replace(run.rig, tags=tuple(rated if one is tag else one for one in run.rig.tags)))
    supply = run.rig.vessels[0]
    console = Console(width=140, record=True, file=StringIO())
    console.print(rehearsal_view(run, PLAN, {tag.id: 10.0}, {supply.id: supply.content_mL - 12.5}))
    text = console.export_text()
    assert "50 %" in text
    assert "12.5" in text


def test_what_would_go_wrong_is_told(run):
    point = replace(run.points[0], settled=False)
    problem = Problem("bottle-short", severity=Severity.ERROR, message="too little", remedy="fill it")
    note = Problem("dispersion-estimated", severity=Severity.NOTE, message="estimated", remedy="")
    found = foreseen(replace(run, points=(point,)), (problem, note))
    assert found == [f"{point.id} would not be steady in its time", "too little; fill it"]


def test_trips_waits_and_alarms_are_told_gravest_first(run):
    def event(kind: EventKind, subject: str, t_s: int, **fields: str) -> Event:
        return Event(kind, subject, t_s * 1_000_000_000, f"words of {subject}", fields)

    alarm = [event(EventKind.ALARM, "LOW", t_s, announce=told) for t_s, told in ((60, "new"), (70, ""), (99, "again"))]
    held = event(EventKind.RUN_STATE, "HELD", 100)
    tripped = [event(EventKind.TRIP, name, 3700, first_out="HOT") for name in ("HOT", "STALE")]
    found = replace(run, points=(), events=(*alarm, held, *tripped))
    assert foreseen(found) == [
        "HOT would trip at 1:01:40: words of HOT (1 more followed within 0.0 s: STALE)",
        "it would wait for a person at 0:01:40: words of HELD",
        "alarm LOW would be told 2 times, first at 0:01:00: words of LOW",
    ]
    console = Console(width=140, record=True, file=StringIO())
    console.print(rehearsal_view(found, PLAN, {}, {}))
    assert console.export_text().count("! ") == 3
