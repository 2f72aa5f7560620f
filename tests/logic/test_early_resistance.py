"""Resistance learned and watched, on exact pressures: a clog and a leak are told, ordinary changes are not."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from fakes.early_bench import EarlyBench, example

from rigd.config.early import ON_S
from rigd.logic.early import resistance
from rigd.logic.early.scene import LOOK_NS
from rigd.logic.early.watch import UNKNOWN_VISCOSITY
from rigd.logic.protect.describe_state import values
from rigd.logic.protect.ledger import Content
from rigd.model.events import EventKind

R1, R2, LEFT = "PT-1.resistance", "PT-2.resistance", "PT-1.time-left"


def learned() -> EarlyBench:
    bench = EarlyBench()
    bench.learn()
    return bench


def test_it_learns_scale_and_what_the_regulator_keeps_whatever_the_geometry_says() -> None:
    bench = learned()
    told = [event for event in bench.events if event.kind is EventKind.MEASUREMENT]
    assert sorted(event.subject for event in told) == ["resistance PT-1"] * 2 + ["resistance PT-2"] * 2
    line = bench.state.watched[1].line
    assert line.offset == pytest.approx(2.0, abs=0.05)
    assert line.weights[1] == pytest.approx(1.0, abs=0.1)
    true, seen, line = bench.pressures(), bench.state.watched[0].predicted, bench.state.watched[0].line
    found = line.offset + line.flowing(seen.cold, seen.warm)
    assert found == pytest.approx(true["PT-1"] - true["PT-2"], abs=0.01)


def test_nothing_is_learned_before_the_path_is_full() -> None:
    bench = EarlyBench()
    seconds = int(60 * bench.program.early.wetted_mL / bench.total_mL_min) - 5
    bench.run(seconds)
    assert not bench.events
    bench.run(30)
    assert bench.events


@pytest.mark.parametrize("factor", [1.5, 3.0, 10.0])
def test_a_clog_is_told_with_its_size(factor: float) -> None:
    bench = learned()
    before = bench.pressures()
    bench.clog = factor
    after = bench.pressures()
    bench.run(60)
    expected = (after["PT-1"] - after["PT-2"]) / (before["PT-1"] - before["PT-2"])
    assert bench.last(R1) == pytest.approx(expected, rel=0.08)
    assert bench.all(R2) == {1.0}


def test_a_leak_before_the_bed_is_told() -> None:
    bench = learned()
    bench.leak_mL_min = 0.6
    bench.run(60)
    assert bench.last(R1) < 0.6


def test_flow_steps_in_both_directions_say_nothing() -> None:
    bench = learned()
    for flow in (4.0, 0.3, 2.0, 0.1, 5.0, 1.0):
        bench.total_mL_min = flow
        bench.run(90)
    assert bench.all(R1) == bench.all(R2) == {1.0}


def test_temperature_steps_say_nothing_and_would_if_viscosity_were_left_out(monkeypatch: pytest.MonkeyPatch) -> None:
    def swept() -> EarlyBench:
        bench = learned()
        for degC in (40.0, 60.0, 0.0, 22.0):
            bench.bed_degC = degC
            bench.run(60)
        return bench

    assert swept().all(R1) == {1.0}
    monkeypatch.setattr("rigd.logic.early.scene.viscosity_mPa_s", lambda points, degC: 1.2)
    assert swept().all(R1) != {1.0}


@pytest.mark.parametrize("mu", [0.7, 1.4])
def test_another_viscosity_of_the_reagent_says_nothing_and_a_clog_in_it_does(mu: float) -> None:
    bench = learned()
    bench.total_mL_min, bench.content = 2.0, Content.REAGENT
    for part in range(1, 11):  # its front moves through the path
        bench.mu = 1.0 + (mu - 1.0) * part / 10
        bench.run(20)
    bench.run(300)
    assert bench.all(R1) == {1.0}
    assert list(bench.state.watched[0].factors.values()) == [pytest.approx(mu, rel=0.05)]
    bench.clog = 2.0
    bench.run(60)
    assert bench.last(R1) > 1.4


def test_on_the_way_back_to_solvent_everything_between_the_two_is_healthy() -> None:
    bench = learned()
    bench.total_mL_min, bench.content, bench.mu = 2.0, Content.REAGENT, 0.7
    bench.run(400)
    assert bench.state.watched[0].before == pytest.approx(0.7, rel=0.05)
    bench.content = Content.SOLVENT  # the syringes hold solvent, the path still reagent
    bench.run(60)
    bench.mu = 1.0
    bench.run(300)
    assert bench.all(R1) == {1.0}


def test_a_solvent_of_unknown_viscosity_may_do_what_solvents_do_with_temperature() -> None:
    plan = replace(example().early, viscosity=None, tolerance=(1 / UNKNOWN_VISCOSITY, UNKNOWN_VISCOSITY))
    bench = EarlyBench(program=replace(example(), early=plan))
    bench.learn()
    for degC in (40.0, 60.0, 22.0):
        bench.bed_degC = degC
        bench.run(60)
    assert bench.all(R1) == {1.0}
    bench.clog = 6.0
    bench.run(60)
    assert bench.last(R1) > 1.4


def test_a_reagent_far_thicker_than_stated_is_told() -> None:
    bench = learned()
    bench.total_mL_min, bench.content, bench.mu = 2.0, Content.REAGENT, 4.0
    bench.run(600)
    assert bench.last(R1) > 1.4
    assert not bench.state.watched[0].factors


def test_a_pause_or_a_shut_outlet_is_not_judged() -> None:
    bench = learned()
    shown = len(bench.values[R1])
    bench.total_mL_min = 0.0
    bench.run(60)
    bench.total_mL_min, bench.outlet, bench.clog = 1.0, "", 5.0
    bench.run(60)
    assert len(bench.values[R1]) == shown


def test_a_wild_look_does_not_last_until_a_person_is_told() -> None:
    bench = learned()
    shown = len(bench.values[R1])
    bench.clog = 8.0
    bench.run(5)
    bench.clog = 1.0
    bench.run(60)
    wild = [value for value in bench.values[R1][shown:] if value != 1.0]
    assert len(wild) * LOOK_NS / 1e9 <= ON_S / 2


def test_time_left_on_a_clog_that_grows_by_a_tenth_each_minute() -> None:
    """P(t) = P0 + r e^(kt) Q: the limit of 8 bar is reached at a time that is known exactly."""
    bench = EarlyBench()
    bench.learn()
    bench.total_mL_min = 2.0
    bench.run(120)
    start_s, k = bench.now_ns / 1e9, 0.1 / 60
    healthy = bench.pressures()["PT-1"]
    bed = healthy - EarlyBench(bed=0.0, total_mL_min=2.0).pressures()["PT-1"]
    end_s = start_s + math.log(1 + (8.0 - healthy) / bed) / k
    told = []
    while bench.now_ns / 1e9 < end_s - 30:
        bench.clog = math.exp(k * (bench.now_ns / 1e9 - start_s))
        bench.run(1)
        if bench.now_ns // 1_000_000_000 % 30 == 0 and bench.last(R1) > 1.5:
            told.append(bench.last(LEFT) / (end_s - bench.now_ns / 1e9))
    assert len(told) > 20
    assert all(0.5 < one < 2.0 for one in told)
    assert all(0.8 < one < 1.25 for one in told[-10:])
    assert "bar at this rate" in bench.state.remarks[LEFT]


def test_a_step_has_no_time_left() -> None:
    bench = learned()
    bench.clog = 4.0
    bench.run(300)
    assert LEFT not in bench.values
    bench.clog = 1.0
    bench.run(60)
    for part in range(60):
        bench.clog = 1.0 + part / 8
        bench.run(10)
    assert bench.last(LEFT) < resistance.FAR_S
    bench.clog = 1.0
    bench.run(60)
    assert bench.last(LEFT) == resistance.FAR_S


def test_an_error_in_the_early_rules_is_said_once_and_stops_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    bench = learned()
    monkeypatch.setattr(resistance, "watch", lambda *_: 1 / 0)
    bench.run(30)
    faults = [event for event in bench.events if event.kind is EventKind.FAULT]
    assert len(faults) == 1
    assert "ZeroDivisionError" in faults[0].text


def test_bad_pressures_are_not_judged() -> None:
    bench = learned()
    shown = len(bench.values[R1])
    bench.extra = {"PT-2": math.nan}
    bench.image["PT-2"] = type(bench.image["PT-2"])("PT-2", 0.0, 0, quality=2)  # type: ignore[arg-type]
    bench.clog = 5.0
    bench.run(60)
    assert len(bench.values[R1]) == shown


def test_the_plan_of_the_example_rig() -> None:
    plan = example().early
    assert [(one.upper, one.lower, one.columns) for one in plan.stretches] == [
        ("PT-1", "PT-2", ("COL",)),
        ("PT-2", "", ()),
    ]
    assert plan.stretches[1].kept_bar == 2.0
    assert plan.stretches[1].limits == (("PT-1", 8.0), ("PT-2", 8.0))
    assert plan.stiff == "PT-1"
    assert [bed.tag for bed in plan.beds] == ["TT-1"]


def test_a_screen_is_not_shown_what_has_not_been_said_yet() -> None:
    shown = values(example(), {})
    assert "PT-1" in shown
    assert not {"PT-1.resistance", "PT-1.time-left", "PT-1.compliance", "flask.volume"} & set(shown)
