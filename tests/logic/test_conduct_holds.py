"""Hold, resume, stop, and everything that does not go as planned."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.conduct_rigs import demo_recipe, sweep_point, two_pumps
from fakes.conduct_run import ConductRun
from fakes.kinematic_rig import Parcel
from hypothesis import example, given, settings
from hypothesis import strategies as st

from rigd.logic import conduct
from rigd.logic.program import RunOptions
from rigd.logic.view import Verdict
from rigd.model.devices import PumpState
from rigd.model.events import EventKind
from rigd.model.orders import Action, Stop, Verb
from rigd.model.recipe import Recipe

OK = Verdict(permit=True)


def short(stagnation_safe: bool = True) -> Recipe:
    points = (sweep_point("P1", 2.0), sweep_point("P2", 1.0))
    return replace(demo_recipe(points, stagnation_safe), leak_test=None)


def in_step(run: ConductRun, point: str, step: str) -> bool:
    memory = run.state.memory
    return run.state.spec.id == f"point-{point}" and getattr(memory, "step", "") == step


def at(point: str, step: str, recipe: Recipe | None = None, syringes: int = 2) -> ConductRun:
    """A run that has come to this step of a point."""
    run = ConductRun(two_pumps(syringes), recipe or short())
    run.start()
    assert run.until(lambda r: in_step(r, point, step), 5000.0)
    return run


def reagent(parcel: Parcel) -> float:
    return sum(share for liquid, share in parcel.mix if liquid.startswith("feed"))


def state(run: ConductRun) -> str:
    return str(run.summary()["state"])


def moving(run: ConductRun) -> list[str]:
    return [name for name, pump in run.plant.pumps.items() if pump.state is PumpState.DELIVERING]


def test_hold_in_mid_collection_and_resume() -> None:
    run = at("P1", "collect")
    run.ask(Verb.HOLD)
    run.until(lambda r: state(r) == "HELD", 60.0)
    assert state(run) == "HELD"
    assert moving(run) == []
    assert run.plant.valves["V-OUT"].position == "waste"
    assert run.plant.valves["V-A"].position == "solvent"
    interrupted = [r for r in conduct.points(run.state) if r.status == "interrupted"]
    assert [r.id for r in interrupted] == ["P1"]
    first_mL = interrupted[0].collected_mL
    run.until(lambda r: False, 300.0)
    assert moving(run) == []
    run.ask(Verb.RESUME)
    run.until(lambda r: state(r) == "RUNNING", 3000.0)
    phases = [e.subject for e in run.of(EventKind.PHASE) if not e.fields["step"]]
    assert phases[phases.index("hold") :] == ["hold", "restart", "restart-switchover", "point-P1"]
    assert run.finish() == "done"
    results = {r.id: r for r in conduct.points(run.state)}
    assert [r.status for r in results.values()] == ["collected", "collected"]
    flask_mL = sum(p.volume_mL for p in run.plant.flask)
    assert flask_mL == pytest.approx(first_mL + sum(r.collected_mL for r in results.values()), rel=0.05)
    assert min(reagent(p) for p in run.plant.flask) > 0.97
    assert run.plant.ran_empty == []


def test_restart_flushes_before_reagent_flows_again() -> None:
    """Reference: restart only through a flush of at least one bed volume plus dead volume."""
    run = at("P2", "settle")
    run.ask(Verb.HOLD)
    run.until(lambda r: state(r) == "HELD", 60.0)
    run.ask(Verb.RESUME)
    assert run.until(lambda r: r.state.spec.id == "restart-switchover", 2000.0)
    assert max(reagent(p) for p in run.plant.sections[0].parcels) < 0.1


def test_restart_keeps_the_reagent_in_the_standby_syringe() -> None:
    run = at("P1", "settle")
    before = dict(run.plant.drawn)
    held = {name: pump.now.level_mL + pump.filling.level_mL for name, pump in run.plant.pumps.items()}
    run.ask(Verb.HOLD)
    run.until(lambda r: state(r) == "HELD", 60.0)
    run.ask(Verb.RESUME)
    run.until(lambda r: state(r) == "RUNNING", 3000.0)
    assert held["PU-A"] > 1.0
    topped = run.plant.drawn["feed-A"] - before["feed-A"]
    assert topped < run.rig.pumps[0].stroke_mL - 0.5


def test_restart_runs_reagent_at_half_the_flow_first() -> None:
    run = at("P1", "settle")
    run.ask(Verb.HOLD)
    run.until(lambda r: state(r) == "HELD", 60.0)
    run.ask(Verb.RESUME)
    run.until(lambda r: r.state.spec.id == "restart-switchover", 2000.0)
    start = run.plant.now_ns
    run.until(lambda r: r.state.spec.id == "point-P1", 2000.0)
    rates = {v for t, _, action, v in run.plant.commands if action is Action.DELIVER and start <= t < run.plant.now_ns}
    assert 0.5 in rates
    assert max(rates - {1.0}) <= 0.5


def test_unsafe_chemistry_is_flushed_out_before_it_rests() -> None:
    run = at("P1", "settle", short(stagnation_safe=False))
    run.ask(Verb.HOLD)
    assert run.until(lambda r: state(r) == "HELD", 1200.0)
    assert max(reagent(p) for p in run.plant.sections[0].parcels) < 0.12
    run.until(lambda r: False, 5.0)
    assert 0 < sum(run.plant.pumps[name].rate for name in moving(run)) < 0.2
    run.until(lambda r: False, 3600.0)
    assert moving(run) == [], "the trickle ends with the solvent at hand"
    assert run.plant.ran_empty == []
    run.ask(Verb.RESUME)
    assert run.finish() == "done"
    assert min(reagent(p) for p in run.plant.flask) > 0.97


def test_unsafe_chemistry_with_one_syringe_runs_the_reagent_out_first() -> None:
    run = at("P1", "settle", short(stagnation_safe=False), syringes=1)
    run.ask(Verb.HOLD)
    assert run.until(lambda r: state(r) == "HELD", 1500.0)
    assert max(reagent(p) for p in run.plant.sections[0].parcels) < 0.12
    assert run.plant.ran_empty == []


@pytest.mark.parametrize("phase", ["prime", "conditioning", "switchover", "flush"])
def test_hold_and_resume_in_other_phases(phase: str) -> None:
    run = ConductRun(two_pumps(), short())
    run.start()
    run.until(lambda r: r.state.spec.id == phase, 5000.0)
    run.until(lambda r: False, 25.0)
    run.ask(Verb.HOLD)
    assert run.until(lambda r: state(r) == "HELD", 120.0)
    assert moving(run) == []
    run.ask(Verb.RESUME)
    assert run.finish() == "done"
    assert [r.status for r in conduct.points(run.state)] == ["collected", "collected"]
    assert min(reagent(p) for p in run.plant.flask) > 0.97
    assert run.plant.ran_empty == []


def test_alarm_asks_for_a_hold_and_keeps_it() -> None:
    run = at("P1", "settle")
    run.verdict = replace(OK, hold_wanted="FLASK-NEARLY-FULL")
    assert run.until(lambda r: state(r) == "HELD", 60.0)
    run.ask(Verb.RESUME)
    run.scan()
    assert state(run) == "HELD"
    answer = run.of(EventKind.REQUEST, "resume")[-1]
    assert answer.fields["result"] == "refused"
    assert "FLASK-NEARLY-FULL" in answer.text
    run.verdict = OK
    run.ask(Verb.RESUME)
    run.scan()
    assert state(run) == "RESTARTING"


def test_hold_interlock_needs_its_reset() -> None:
    run = at("P1", "settle")
    run.verdict = Verdict(stop=Stop.HOLD, permit=False, first_out="LOW-LEVEL")
    assert run.until(lambda r: state(r) == "HELD", 60.0)
    assert "LOW-LEVEL" in run.of(EventKind.RUN_STATE, "HOLDING")[0].text
    run.ask(Verb.RESUME)
    run.scan()
    assert state(run) == "HELD"


def test_hold_during_a_restart() -> None:
    run = at("P1", "settle")
    for _ in range(2):
        run.ask(Verb.HOLD)
        assert run.until(lambda r: state(r) == "HELD", 60.0)
        run.ask(Verb.RESUME)
        assert run.until(lambda r: state(r) == "RESTARTING", 5.0)
        run.until(lambda r: False, 20.0)
    assert run.finish() == "done"
    assert min(reagent(p) for p in run.plant.flask) > 0.97


@pytest.mark.parametrize(
    ("stop", "states"), [(Stop.QUENCH, ["STOPPING", "STOPPED"]), (Stop.CUT, ["ABORTING", "ABORTED"])]
)
def test_stops_are_followed_and_nothing_is_wanted(stop: Stop, states: list[str]) -> None:
    run = at("P1", "collect")
    run.trip(stop, "PRESSURE-HIGH")
    run.scan()
    assert state(run) == states[0]
    assert run.state.demand is None
    assert "PRESSURE-HIGH" in run.of(EventKind.RUN_STATE, states[0])[0].text
    run.until(lambda r: False, 30.0)
    assert (state(run), conduct.outcome(run.state)) == (states[0], "")
    run.stop_done()
    run.scan()
    assert (state(run), conduct.outcome(run.state)) == (states[1], "stopped")
    assert [r.status for r in conduct.points(run.state)] == ["interrupted"]
    assert run.state.demand is None


def test_cut_beats_quench_and_never_comes_back() -> None:
    run = at("P1", "settle")
    run.trip(Stop.QUENCH)
    run.scan()
    run.trip(Stop.CUT)
    run.scan()
    assert state(run) == "ABORTING"
    run.trip(Stop.QUENCH)
    run.scan()
    assert state(run) == "ABORTING"


def test_temperature_never_reached_holds_with_a_prompt() -> None:
    run = ConductRun(two_pumps(), short())
    run.plant.bath_stuck = True
    run.start()
    assert run.until(lambda r: state(r) == "HELD", 5000.0)
    prompts = run.summary()["prompts"]
    assert isinstance(prompts, list)
    assert [p["id"] for p in prompts] == ["conditioning-late"]
    assert "60 degC" in prompts[0]["text"]
    run.plant.bath_stuck = False
    run.ask(Verb.RESUME)
    run.scan()
    assert run.summary()["prompts"] == []
    assert run.finish() == "done"


def leaking() -> ConductRun:
    recipe = replace(demo_recipe((sweep_point("P1", 2.0),)))
    run = ConductRun(two_pumps(), recipe)
    run.plant.leak_bar_s = 0.02
    run.start()
    return run


def test_leak_fails_opens_first_and_holds() -> None:
    run = leaking()
    assert run.until(lambda r: bool(r.of(EventKind.RUN_STATE, "HOLDING")), 3000.0)
    assert run.plant.valves["V-OUT"].position == "waste"
    assert run.plant.valves["V-OUT"].left_s == 0
    run.until(lambda r: state(r) == "HELD", 60.0)
    assert [p["id"] for p in run.summary()["prompts"]] == ["leak-test-failed"]  # type: ignore[attr-defined]
    drop = run.of(EventKind.MEASUREMENT, "leak test drop")[0]
    assert float(drop.fields["value"]) == pytest.approx(0.8, rel=0.1)
    run.plant.leak_bar_s = 0.0
    run.ask(Verb.RESUME)
    assert run.finish() == "done"


def test_pressure_that_never_comes_is_a_failed_leak_test() -> None:
    run = ConductRun(two_pumps(), demo_recipe((sweep_point("P1", 2.0),)))
    run.plant.compliance_mL_bar = 5.0
    run.start()
    assert run.until(lambda r: state(r) == "HELD", 3000.0)
    assert "instead of 4 bar" in run.of(EventKind.RUN_STATE, "HOLDING")[0].text


def test_leak_test_by_hand_asks_for_the_plug() -> None:
    recipe = demo_recipe((sweep_point("P1", 2.0),))
    assert recipe.leak_test is not None
    recipe = replace(recipe, leak_test=replace(recipe.leak_test, shut_position=""))
    run = ConductRun(two_pumps(), recipe)
    run.start()
    assert run.until(lambda r: "leak-test-plug" in r.state.prompts, 3000.0)
    run.until(lambda r: False, 60.0)
    assert moving(run) == [], "nothing is delivered before the plug is confirmed"


def waiting(verdict: Verdict = OK, recipe: Recipe | None = None, options: RunOptions | None = None) -> ConductRun:
    run = ConductRun(two_pumps(), recipe or short(), options or RunOptions())
    run.verdict = verdict
    run.until(lambda r: len(r.samples) == len(r.rig.tags), 20.0)
    return run


def refusal(run: ConductRun, verb: Verb = Verb.START) -> str:
    run.ask(verb)
    run.scan()
    answer = run.of(EventKind.REQUEST, str(verb))[-1]
    assert answer.fields["result"] == "refused"
    return answer.text


def test_start_needs_the_checklist_and_a_name() -> None:
    run = waiting()
    assert "not confirmed: bed, vent" in refusal(run)
    run.ask(Verb.CONFIRM, "bed", who="")
    run.scan()
    assert "needs a name" in run.of(EventKind.REQUEST, "confirm")[-1].text
    run.ask(Verb.CONFIRM, "bed")
    run.scan()
    assert "not confirmed: vent" in refusal(run)
    run.ask(Verb.CONFIRM, "vent")
    run.ask(Verb.START)
    run.scan()
    assert state(run) == "RUNNING"
    confirmed = [e for e in run.of(EventKind.PROMPT) if e.fields["status"] == "confirmed"]
    assert [(e.subject, e.fields["who"]) for e in confirmed] == [("bed", "tester"), ("vent", "tester")]


def test_start_needs_the_permit() -> None:
    run = waiting(Verdict(permit=False))
    run.ask(Verb.CONFIRM, "*")
    assert "an interlock is tripped" in refusal(run)


def test_start_needs_good_samples() -> None:
    run = waiting()
    run.silence("PU-A.level")
    run.ask(Verb.CONFIRM, "*")
    assert "no good value: PU-A.level" in refusal(run)


def test_reagent_needs_a_sheet() -> None:
    run = waiting(recipe=replace(short(), sheet=None))
    run.ask(Verb.CONFIRM, "*")
    assert "no chemistry sheet" in refusal(run)
    assert conduct.outcome(run.state) == "refused"


def test_unattended_needs_a_permit() -> None:
    run = waiting(options=RunOptions(unattended=True))
    run.ask(Verb.CONFIRM, "*")
    assert "needs a permit" in refusal(run)


def test_requests_at_the_wrong_time_are_refused() -> None:
    run = waiting()
    assert "IDLE" in refusal(run, Verb.HOLD)
    assert "not held" in refusal(run, Verb.RESUME)
    run = at("P1", "settle")
    assert "RUNNING" in refusal(run, Verb.START)
    run.ask(Verb.CONFIRM, "nothing")
    run.scan()
    assert "nothing called 'nothing'" in run.of(EventKind.REQUEST, "confirm")[-1].text


def test_every_request_is_answered_once() -> None:
    run = waiting()
    verbs = [Verb.HOLD, Verb.CONFIRM, Verb.START, Verb.RESUME, Verb.START]
    for verb in verbs:
        run.ask(verb, "*")
    run.scan()
    assert [e.subject for e in run.of(EventKind.REQUEST)] == [str(v) for v in verbs]


def test_stop_before_the_start_calls_the_run_off() -> None:
    run = waiting()
    run.ask(Verb.STOP)
    run.scan()
    assert conduct.outcome(run.state) == "stopped"
    run.ask(Verb.CONFIRM, "*")
    assert "called off" in refusal(run)


def test_unsettled_point_is_collected_or_abandoned_as_the_recipe_says() -> None:
    for on_timeout, status in (("collect", "unsettled"), ("abandon", "abandoned")):
        recipe = short()
        recipe = replace(recipe, settle=replace(recipe.settle, tolerance=1e-6, on_timeout=on_timeout))
        run = ConductRun(two_pumps(), recipe)
        run.start()
        assert run.finish() == "done"
        assert {r.status for r in conduct.points(run.state)} == {status}
        assert not any(r.settled for r in conduct.points(run.state))


@settings(max_examples=6, deadline=None)
@given(
    hold_s=st.lists(st.floats(1.0, 1500.0), min_size=1, max_size=3),
    wait_s=st.floats(1.0, 200.0),
    syringes=st.sampled_from([1, 2]),
    safe=st.booleans(),
)
@example(hold_s=[150.90319505210704, 1197.2155027621307, 62.64169093278228], wait_s=1.5, syringes=1, safe=False)
@example(hold_s=[258.3870219995864, 1124.128714481853], wait_s=129.7, syringes=2, safe=False)
@example(hold_s=[861.4382983184856, 521.1555068789817, 138.63833568743536], wait_s=199.757, syringes=2, safe=False)
def test_holds_at_any_time_never_spoil_a_fraction(
    hold_s: list[float], wait_s: float, syringes: int, safe: bool
) -> None:
    """It ends, no pump runs empty, and only reagent at the right flows is collected."""
    run = ConductRun(two_pumps(syringes), short(safe))
    run.start()
    for seconds in hold_s:
        run.until(lambda r: conduct.outcome(r.state) != "", seconds)
        run.ask(Verb.HOLD)
        run.until(lambda r: state(r) in ("HELD", "COMPLETE"), 1500.0)
        run.until(lambda r: False, wait_s)
        run.ask(Verb.RESUME)
    assert run.finish() == "done"
    flows = {tuple(sorted(r.flows_mL_min.items())) for r in conduct.points(run.state)}
    assert {p.flows for p in run.plant.flask} == flows
    assert min(reagent(p) for p in run.plant.flask) > 0.95
    assert run.plant.ran_empty == []
    assert [r.status for r in conduct.points(run.state)] == ["collected", "collected"]
