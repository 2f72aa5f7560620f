"""Whole recipes against the kinematic rig. What ended up in the flask is asked of the parcels, not of the sequence."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace

import pytest
from fakes.conduct_rigs import demo_recipe, one_pump, solvent_recipe, sweep_point, three_pumps, two_pumps
from fakes.conduct_run import ConductRun
from fakes.kinematic_rig import Parcel

from rigd.logic import conduct
from rigd.logic.planning import plan
from rigd.logic.program import RunOptions
from rigd.model.events import EventKind
from rigd.model.orders import Action
from rigd.model.recipe import Point, PointKind, Ramp, Recipe


def whole(run: ConductRun) -> ConductRun:
    run.start()
    assert run.finish() == "done"
    return run


@pytest.fixture(scope="module")
def dual() -> ConductRun:
    return whole(ConductRun(two_pumps(2), demo_recipe()))


@pytest.fixture(scope="module")
def single() -> ConductRun:
    """Without the fastest point: one syringe could not give it enough."""
    return whole(ConductRun(two_pumps(1), demo_recipe(demo_recipe().points[1:])))


def reagent(parcel: Parcel) -> float:
    return sum(share for liquid, share in parcel.mix if liquid.startswith("feed"))


def by_flows(parcels: Iterable[Parcel]) -> dict[tuple[tuple[str, float], ...], float]:
    found: dict[tuple[tuple[str, float], ...], float] = {}
    for parcel in parcels:
        found[parcel.flows] = found.get(parcel.flows, 0.0) + parcel.volume_mL
    return found


def check_fractions(run: ConductRun) -> None:
    """Every fraction holds liquid that entered at its own flows only, of reagent only, and the volume that is told."""
    results = {tuple(sorted(r.flows_mL_min.items())): r for r in conduct.points(run.state)}
    found = by_flows(run.plant.flask)
    assert set(found) == set(results)
    for flows, volume_mL in found.items():
        assert volume_mL == pytest.approx(results[flows].collected_mL, rel=0.1)
    assert min(reagent(parcel) for parcel in run.plant.flask) > 0.97


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_every_fraction_holds_its_own_point_only(rig: str, request: pytest.FixtureRequest) -> None:
    check_fractions(request.getfixturevalue(rig))


def test_all_points_are_collected_and_conversion_falls_as_flow_rises(dual: ConductRun) -> None:
    results = conduct.points(dual.state)
    assert [r.id for r in results] == ["P1", "P2", "P3", "P4", "P5", "P6"]
    assert all(r.settled and r.status == "collected" for r in results)
    conversions = [r.conversion for r in results]
    assert conversions == sorted(conversions)
    for result in results:
        total = sum(result.flows_mL_min.values())
        assert result.conversion == pytest.approx(1 - math.exp(-0.6 / total), abs=0.006)
        assert result.values["IR.conversion.n"] >= 12


def test_residence_time_is_that_of_the_columns_at_the_point(dual: ConductRun) -> None:
    column_mL = dual.program.path.column_mL
    for result in conduct.points(dual.state):
        assert result.residence_time_s == pytest.approx(60 * column_mL / sum(result.flows_mL_min.values()), rel=0.01)


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_fronts_meet_at_the_tee(rig: str, request: pytest.FixtureRequest) -> None:
    """Within a few microlitres at the switchover's flow of 1 mL/min per pump, whatever was left in the syringes."""
    arrivals = sorted(request.getfixturevalue(rig).plant.reagent_at_switchover_s.values())
    assert len(arrivals) == 2
    assert (arrivals[1] - arrivals[0]) * 1.0 / 60 * 1000 < 5.0


def collections_ns(run: ConductRun) -> list[tuple[int, int]]:
    return [(r.collect_start_ns, r.collect_end_ns) for r in conduct.points(run.state)]


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_no_refill_or_change_over_during_a_collection(rig: str, request: pytest.FixtureRequest) -> None:
    run = request.getfixturevalue(rig)
    fills = [t for t, _, action, _ in run.plant.commands if action in (Action.FILL, Action.SWAP)]
    moves = [e.t_ns for e in run.of(EventKind.REFILL)]
    assert fills
    for start, end in collections_ns(run):
        assert not [t for t in (*fills, *moves) if start <= t <= end]


def test_a_syringe_is_free_for_a_flush_most_of_the_time() -> None:
    """A quench needs a pump whose standby syringe is empty; it holds reagent only shortly before a change-over."""
    run = ConductRun(two_pumps(2), demo_recipe())
    run.start()
    run.until(lambda r: r.state.spec.id == "point-P1", 3000.0)
    blocked_s = whole_s = last_s = 0.0
    while run.state.spec.id.startswith("point"):
        last_s = run.now_s
        run.scan()
        whole_s += run.now_s - last_s
        if all(pump.filling.level_mL > 0.01 for pump in run.plant.pumps.values()):
            blocked_s += run.now_s - last_s
    assert blocked_s < 0.2 * whole_s


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_no_pump_runs_empty(rig: str, request: pytest.FixtureRequest) -> None:
    assert request.getfixturevalue(rig).plant.ran_empty == []


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_flush_leaves_only_solvent(rig: str, request: pytest.FixtureRequest) -> None:
    run = request.getfixturevalue(rig)
    for section in run.plant.sections:
        assert max(reagent(parcel) for parcel in section.parcels) < 0.02
    for pump in run.plant.pumps.values():
        for syringe in pump.syringes:
            assert sum(share for liquid, share in syringe.mix if liquid.startswith("feed")) < 0.01


def test_prime_fills_the_reagent_lines_with_reagent(dual: ConductRun) -> None:
    """1.5 times the hold-up of the line was drawn through it before the solvent that follows."""
    turns = [(t, value) for t, unit, action, value in dual.plant.commands if unit == "V-A" and action is Action.MOVE]
    first = next(t for t, value in turns if value == 1.0)
    drawn = next(e for e in dual.of(EventKind.REFILL, "PU-A") if e.t_ns > first and e.fields["status"] == "done")
    assert drawn.fields["liquid"] == "feed-A"
    assert float(drawn.fields["volume_mL"]) >= 1.5 * 0.3926


@pytest.mark.parametrize("rig", ["dual", "single"])
def test_plan_agrees_with_what_happened(rig: str, request: pytest.FixtureRequest) -> None:
    run = request.getfixturevalue(rig)
    planned = plan(run.program)
    assert run.now_s - 6 == pytest.approx(planned.duration_s, rel=0.08)
    for liquid, volume_mL in planned.used_mL.items():
        assert run.plant.drawn[liquid] == pytest.approx(volume_mL, rel=0.15)


def test_time_left_is_about_right_on_the_way() -> None:
    run = ConductRun(two_pumps(2), demo_recipe())
    run.start()
    guesses = []
    while conduct.outcome(run.state) == "":
        run.until(lambda r: conduct.outcome(r.state) != "", 200.0)
        campaign = run.summary()["campaign"]
        assert isinstance(campaign, dict)
        guesses.append((run.now_s, float(campaign["left_s"])))
    end_s = guesses[-1][0]
    for now_s, left_s in guesses[:-1]:
        assert left_s == pytest.approx(end_s - now_s, abs=0.12 * end_s)


def test_same_seed_same_run(dual: ConductRun) -> None:
    again = whole(ConductRun(two_pumps(2), demo_recipe()))
    assert again.events == dual.events
    assert again.plant.commands == dual.plant.commands


def varied(points: tuple[Point, ...]) -> Recipe:
    return replace(demo_recipe(points), leak_test=None)


def test_returns_and_blanks() -> None:
    points = (
        sweep_point("P1", 2.0),
        sweep_point("B1", 2.0, kind=PointKind.BLANK),
        replace(sweep_point("P2", 1.0), temperature_degC=50.0),
        replace(sweep_point("R1", 2.0, kind=PointKind.RETURN), of="P1"),
    )
    run = whole(ConductRun(two_pumps(), varied(points)))
    results = conduct.points(run.state)
    assert [(r.id, r.status) for r in results] == [(p.id, "collected") for p in points]
    assert results[2].temperature_degC == pytest.approx(49.8, abs=1.0)
    assert math.isnan(results[1].conversion), "a blank has no conversion"
    assert results[3].conversion == pytest.approx(results[0].conversion, abs=0.01)
    blank = [p for p in run.plant.flask if reagent(p) < 0.5]
    assert sum(p.volume_mL for p in blank) == pytest.approx(0.5, rel=0.15)
    assert max(reagent(p) for p in blank) < 0.02
    assert min(reagent(p) for p in run.plant.flask if p not in blank) > 0.97


def test_one_pump() -> None:
    recipe = varied((sweep_point("P1", 1.0, "A"), sweep_point("P2", 0.5, "A")))
    run = whole(ConductRun(one_pump(), recipe))
    check_fractions(run)


def test_three_pumps_fronts_meet_where_the_third_joins() -> None:
    recipe = varied((sweep_point("P1", 3.0, "ABC"), sweep_point("P2", 1.5, "ABC")))
    run = whole(ConductRun(three_pumps(), recipe))
    check_fractions(run)
    arrivals = run.plant.reagent_at_switchover_s
    first = run.program.path.sections[0].volume_mL
    share = 2.0 / 3
    transit_s = 60 * first / (2 * share)
    assert (arrivals["PU-A"] - arrivals["PU-B"]) * share / 60 * 1000 == pytest.approx(0.0, abs=5.0)
    assert (arrivals["PU-C"] - arrivals["PU-A"] - transit_s) * share / 60 * 1000 == pytest.approx(0.0, abs=5.0)


def test_unequal_ratio() -> None:
    points = (
        Point("P1", PointKind.POINT, {"PU-A": 0.4, "PU-B": 1.2}, 60.0),
        Point("P2", PointKind.POINT, {"PU-A": 1.0, "PU-B": 0.5}, 60.0),
    )
    run = whole(ConductRun(two_pumps(), varied(points)))
    check_fractions(run)


def test_solvent_only_recipe_never_touches_reagent() -> None:
    run = whole(ConductRun(two_pumps(), replace(solvent_recipe(), points=(sweep_point("S1", 2.0),))))
    assert set(run.plant.drawn) == {"solvent"}
    assert [r.status for r in conduct.points(run.state)] == ["collected"]


def test_resume_skips_what_is_collected_and_primes_again() -> None:
    options = RunOptions(collected=("P1", "P2", "P3", "P4"))
    run = whole(ConductRun(two_pumps(), demo_recipe(), options))
    assert [r.id for r in conduct.points(run.state)] == ["P5", "P6"]
    phases = [e.subject for e in run.of(EventKind.PHASE) if not e.fields["step"]]
    assert phases == ["prime", "conditioning", "leak-test", "switchover", "point-P5", "point-P6", "flush", "park"]


def test_nothing_left_to_collect_only_flushes_and_parks() -> None:
    options = RunOptions(collected=tuple(f"P{i}" for i in range(1, 7)))
    run = whole(ConductRun(two_pumps(), demo_recipe(), options))
    assert [e.subject for e in run.of(EventKind.PHASE) if not e.fields["step"]] == ["flush", "park"]


def test_ramp_starts_slowly_from_rest() -> None:
    recipe = replace(varied((sweep_point("P1", 2.0),)), ramp=Ramp(0.2, 5.0))
    run = whole(ConductRun(two_pumps(), recipe))
    check_fractions(run)
    rates = [(t, v) for t, unit, action, v in run.plant.commands if unit == "PU-A" and action is Action.DELIVER]
    assert rates[0][1] == pytest.approx(0.4)
    assert rates[1][1] == pytest.approx(2.0)
    assert (rates[1][0] - rates[0][0]) / 1e9 == pytest.approx(5.0, abs=0.1)
    arrivals = sorted(run.plant.reagent_at_switchover_s.values())
    assert (arrivals[1] - arrivals[0]) / 60 * 1000 < 10.0


def test_compliance_is_measured(dual: ConductRun) -> None:
    found = dual.of(EventKind.MEASUREMENT, "compliance")
    assert len(found) == 1
    assert float(found[0].fields["value"]) == pytest.approx(dual.plant.compliance_mL_bar, rel=0.05)


def test_front_events_name_their_places(dual: ConductRun) -> None:
    switch = next(e for e in dual.of(EventKind.PHASE, "switchover")).t_ns
    later = [e for e in dual.of(EventKind.FRONT) if e.t_ns > switch and e.fields.get("kind") != "rinse"]
    assert {e.subject for e in later[:2]} == {"PU-A", "PU-B"}
    assert [e.fields["place"] for e in later[2:5]] == ["COL", "IR", "V-OUT"]
