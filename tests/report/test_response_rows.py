"""How fast a run answered, from its record: hand-counted ages, and a rehearsed trip."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.recorded import BLOCK, recorded

from rigd.model.events import Event, EventKind
from rigd.report.collect import read_run
from rigd.report.facts import report_facts
from rigd.report.page import render_page
from rigd.report.response_rows import age_rows, trip_rows


def test_a_rehearsed_trip_is_timed_and_its_samples_have_no_age() -> None:
    run = read_run(recorded(BLOCK))
    (row,) = trip_rows(run)
    assert row.interlock == "PRESSURE-HIGH"
    assert row.decided_s == row.answered_s == pytest.approx(0.2)
    assert row.stands_s is not None
    assert row.planned_s is not None
    assert row.allowed_s is not None
    assert row.answered_s < row.planned_s < row.allowed_s
    assert not row.late
    assert age_rows(run) == ()
    assert "virtual time" in render_page(run)


def test_ages_are_counted_into_half_99_percent_and_all() -> None:
    ages = {"PT-1": {10: 980, 40: 15, 200: 5}, "TT-1": {5: 1}, "PT-2": {0: 10}}
    rows = age_rows(replace(read_run(recorded()), ages_ms=ages))
    assert [(row.tag, row.samples, row.median_s, row.p99_s, row.worst_s) for row in rows] == [
        ("PT-1", 1000, 0.01, 0.04, 0.2),
        ("TT-1", 1, 0.005, 0.005, 0.005),
        ("PT-2", 10, 0.0, 0.0, 0.0),
    ]


def test_a_broken_budget_is_marked_and_one_without_a_plan_is_not() -> None:
    fields = {"value": 2.0, "decided_s": 0.1, "planned_s": 0.5, "allowed_s": 1.5, "unit": "s"}
    slow = Event(EventKind.MEASUREMENT, "response X", 5, "x", fields)
    bare = Event(EventKind.MEASUREMENT, "response Y", 5, "x", {"value": 2.0, "decided_s": 0.1, "unit": "s"})
    run = replace(read_run(recorded()), events=(slow, bare))
    assert [(row.interlock, row.late) for row in trip_rows(run)] == [("X", True), ("Y", False)]
    facts = report_facts(run)["response"]
    assert [trip["answered_s"] for trip in facts["trips"]] == [2.0, 2.0]  # type: ignore[index]
