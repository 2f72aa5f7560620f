"""The rig's own response measured: samples that come late, stops that are answered late, a path stiffer than stated."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.early_bench import example
from fakes.rehearsal import Rehearsal, StandIn, sequence_demand
from fakes.rigs import MS, S, program_of

from rigd.logic.demand import PumpDemand
from rigd.logic.program import RunOptions, compile_program
from rigd.logic.protect import reaction
from rigd.logic.protect.describe_state import standing
from rigd.logic.response import SHARE, responses
from rigd.model.events import Event, EventKind
from rigd.model.samples import Sample


def measured(run: Rehearsal, what: str) -> list[Event]:
    return [event for event in run.happened(EventKind.MEASUREMENT) if event.subject.startswith(what)]


def told(run: Rehearsal) -> list[str]:
    return [event.text for event in run.happened(EventKind.ALARM) if event.subject == "RESPONSE-LATE"]


def running() -> Rehearsal:
    run = Rehearsal(program_of(), StandIn(sequence_demand(pumps={"PU-A": PumpDemand(1.0), "PU-B": PumpDemand(1.0)})))
    for name in ("PU-A", "PU-B"):
        run.pump(name).level_mL = 4.0
    run.ready()
    run.run(5.0)
    return run


def test_a_trip_is_timed_from_its_sample_to_the_answers_and_to_the_feedback() -> None:
    run = running()
    run.sensors["PT-1"] = 9.0
    run.run(5.0)
    (response,) = measured(run, "response")
    assert response.subject == "response PRESSURE-HIGH"
    assert response.fields["decided_s"] == pytest.approx(0.2)  # its on-delay: the dry rig answers in no time
    assert response.fields["value"] == pytest.approx(0.2)
    (stands,) = measured(run, "confirmation")
    assert 0.2 <= float(stands.fields["value"]) <= 2.0
    assert not told(run)


def test_a_stop_that_is_answered_late_breaks_the_budget_and_is_told() -> None:
    run = running()
    most_s = float(reaction.allowed_s(run.program.budgets.planned["PRESSURE-HIGH"]))
    run.failing = {"PU-A"}
    run.sensors["PT-1"] = 9.0
    run.run(most_s + 5.0)
    assert not measured(run, "response")
    run.failing = set()
    run.run(10.0)
    (response,) = measured(run, "response")
    assert float(response.fields["value"]) > float(response.fields["allowed_s"])
    assert any("from the sample to the pumps" in text for text in told(run))


def test_a_sample_older_than_the_budget_is_told_and_a_younger_one_is_not() -> None:
    run = running()
    limit_ns = run.program.budgets.oldest_ns["PT-1"]
    run.now_ns += 20 * S
    run.give(("PT-1", 1.0, run.now_ns - limit_ns + MS))
    run.run(2.0)
    assert not told(run)
    run.now_ns += 20 * S
    run.give(("PT-1", 1.0, run.now_ns - limit_ns - MS))
    run.run(2.0)
    assert len(told(run)) >= 1
    assert "s old when it was judged" in told(run)[0]


def test_what_is_allowed_is_half_the_process_safety_time_or_twice_the_plan() -> None:
    planned = example().budgets.planned
    pressure, bed = planned["PRESSURE-HIGH"], planned["BED-HOT"]
    assert pressure.safety_s is not None
    assert reaction.allowed_s(pressure) == SHARE * pressure.safety_s
    assert bed.safety_s is None
    assert reaction.allowed_s(bed) == 2 * bed.budget.total_s
    assert reaction.allowed_s(replace(pressure, safety_s=0.1)) == pressure.budget.total_s


def test_a_paced_run_has_no_budgets() -> None:
    rig, recipe = example().rig, example().recipe
    paced = compile_program(rig, recipe, RunOptions(stale_floor_ns=S))
    assert reaction.late(paced.budgets, [Sample("PT-1", 1.0, 0)], 3600 * S) == ""


def test_a_path_stiffer_than_stated_leaves_less_time_and_a_softer_one_more() -> None:
    """dP/dt = Q/C: the time to the rating is proportional to the compliance."""
    rig, recipe = example().rig, example().recipe
    stated = {one.interlock: one for one in responses(rig, recipe)}["PRESSURE-HIGH"]
    (soft,), slow = reaction.with_compliance(rig, recipe, 0.04, 0)
    assert stated.safety_s is not None
    assert soft.fields["value"] == pytest.approx(2 * stated.safety_s, rel=1e-3)
    assert slow == ""
    (stiff,), slow = reaction.with_compliance(rig, recipe, 0.004, 0)
    assert stiff.fields["value"] == pytest.approx(0.2 * stated.safety_s, rel=1e-3)
    assert "as measured only" in slow


def test_a_screen_shows_what_the_value_of_a_standing_alarm_means_where_that_is_known() -> None:
    run = running()
    run.sensors["PT-1"] = 7.0
    run.run(3.0)
    state = run.state.protect
    assert [alarm["id"] for alarm in standing(run.program, state, run.now_ns)] == ["PRESSURE-RISING"]
    said = replace(state, early=replace(state.early, remarks={"PT-1": "12 min to 8 bar at this rate"}))
    assert standing(run.program, said, run.now_ns)[0]["text"] == "12 min to 8 bar at this rate"
