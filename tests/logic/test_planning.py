"""The plan on paper: volumes, findings, and the arithmetic of waits (published values named beside them)."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from fakes.conduct_rigs import demo_recipe, solvent_recipe, sweep_point, three_pumps, two_pumps

from rigd.logic.conduct.campaign import PhaseKind, campaign
from rigd.logic.conduct.layout import make_layout
from rigd.logic.conduct.point_needs import settle_rule, settle_s
from rigd.logic.dispersion import relative_variance, settle_volumes_99, tanks
from rigd.logic.flow_path import Segment
from rigd.logic.planning import Plan, plan
from rigd.logic.program import RunOptions, compile_program
from rigd.model.problems import Severity
from rigd.model.recipe import PointKind, Recipe
from rigd.model.rig import RigDefinition, Vessel


def planned(recipe: Recipe | None = None, rig: RigDefinition | None = None, options: RunOptions | None = None) -> Plan:
    return plan(compile_program(rig or two_pumps(), recipe or demo_recipe(), options))


def codes(found: Plan) -> set[str]:
    """Errors and warnings; the one note is ``test_undeveloped_tubes_are_noted``'s."""
    return {problem.code for problem in found.problems if problem.severity is not Severity.NOTE}


def test_undeveloped_tubes_are_noted() -> None:
    """Tubes below D tau/R^2 = 0.8 stand in one note, each with its number (V. Ananthakrishnan et al. 1965)."""
    (note,) = [problem for problem in planned().problems if problem.severity is Severity.NOTE]
    assert note.code == "dispersion-estimated"
    assert "L-1 0.0" in note.message


def test_phases_follow_each_other_without_gaps() -> None:
    found = planned()
    clock = 0.0
    for phase in found.phases:
        assert phase.start_s == pytest.approx(clock)
        clock += phase.duration_s
    assert found.duration_s == pytest.approx(clock)
    assert [p.kind for p in found.phases][:4] == [
        PhaseKind.PRIME, PhaseKind.CONDITIONING, PhaseKind.LEAK_TEST, PhaseKind.SWITCHOVER,
    ]  # fmt: skip


def test_volume_per_point_is_nearly_constant_while_time_goes_as_one_over_flow() -> None:
    """Reference: the slowest two points take most of the night."""
    points = [phase for phase in planned().phases if phase.kind is PhaseKind.POINT]
    slow = points[-2:]
    volumes = [sum(phase.volumes_mL.values()) for phase in slow]
    assert volumes[0] == pytest.approx(volumes[1], rel=0.02)
    ratio = sum(slow[0].flows_mL_min.values()) / sum(slow[1].flows_mL_min.values())
    assert slow[1].duration_s / slow[0].duration_s == pytest.approx(ratio, rel=0.03)


def test_settling_takes_the_volumes_or_the_signal_gate() -> None:
    layout = make_layout(compile_program(two_pumps(), demo_recipe()))
    fast, slow = sweep_point("F", 4.0), sweep_point("S", 0.4)
    residence_s = 60 * layout.trunk_mL / 4.0
    assert settle_s(layout, fast, True) == pytest.approx(residence_s + 14 * 5)
    assert settle_s(layout, fast, False) == pytest.approx(2.5 * residence_s)
    assert settle_s(layout, slow, True) == pytest.approx(2.5 * 60 * layout.trunk_mL / 0.4)


def test_window_of_the_gate_spans_about_one_residence_time() -> None:
    layout = make_layout(compile_program(two_pumps(), demo_recipe()))
    point = sweep_point("S", 0.1)
    rule = settle_rule(layout, point)
    residence_s = 60 * layout.trunk_mL / 0.1
    assert rule.window * rule.block * 5.0 == pytest.approx(residence_s, rel=0.05)
    assert rule.horizon_s == pytest.approx(60 * (layout.dead_mL + 0.5) / 0.1)


def test_used_liquids_add_up() -> None:
    found = planned()
    assert set(found.used_mL) == {"solvent", "feed-A", "feed-B"}
    assert sum(found.used_mL.values()) == pytest.approx(found.waste_mL + found.collected_mL)
    assert found.collected_mL == pytest.approx(6 * 0.5)


def test_collected_points_are_not_planned_again() -> None:
    assert planned(options=RunOptions(collected=("P5", "P6"))).duration_s < planned().duration_s - 700


def test_blanks_bring_changes_of_liquid_with_them() -> None:
    points = (sweep_point("P1", 2.0), sweep_point("B1", 2.0, kind=PointKind.BLANK), sweep_point("P2", 1.0))
    program = compile_program(two_pumps(), demo_recipe(points))
    names = [spec.id for spec in campaign(program)]
    assert names[3:-2] == ["switchover", "point-P1", "to-solvent-B1", "point-B1", "switchover-P2", "point-P2"]


def test_a_blank_before_the_first_point_needs_no_switchover() -> None:
    points = (sweep_point("B1", 2.0, kind=PointKind.BLANK), sweep_point("P1", 2.0))
    names = [spec.id for spec in campaign(compile_program(two_pumps(), demo_recipe(points)))]
    assert names[3:-2] == ["point-B1", "switchover-P1", "point-P1"]


def test_short_bottle_is_found() -> None:
    rig = two_pumps()
    vessels = tuple(replace(v, content_mL=15.0) if v.id == "bottle-A" else v for v in rig.vessels)
    found = planned(rig=replace(rig, vessels=vessels))
    short = [problem for problem in found.problems if problem.code == "bottle-short"]
    assert len(short) == 1
    assert "feed-A" in short[0].message
    assert short[0].severity is Severity.ERROR


@pytest.mark.parametrize(("vessel", "code"), [("flask", "flask-overflow"), ("waste", "waste-overflow")])
def test_overflowing_receiver_is_found(vessel: str, code: str) -> None:
    rig = two_pumps()
    vessels = tuple(_small(v) if v.id == vessel else v for v in rig.vessels)
    assert codes(planned(rig=replace(rig, vessels=vessels))) == {code}


def _small(vessel: Vessel) -> Vessel:
    return replace(vessel, capacity_mL=2.0)


def test_point_that_one_syringe_cannot_give() -> None:
    recipe = demo_recipe((sweep_point("P1", 2.0),))
    big = replace(recipe, collect=replace(recipe.collect, volume_mL=8.0))
    assert "syringe-short" in codes(planned(big, two_pumps(1)))
    assert codes(planned(big, two_pumps(2))) == {"flush-blocked"}


def test_too_few_volumes_are_warned_of() -> None:
    recipe = demo_recipe()
    found = planned(replace(recipe, settle=replace(recipe.settle, volumes=1.1)))
    assert codes(found) == {"settle-short"}
    assert {problem.severity for problem in found.problems} == {Severity.WARNING, Severity.NOTE}


def test_solvent_only_uses_solvent_only() -> None:
    assert set(planned(solvent_recipe()).used_mL) == {"solvent"}


def test_what_follows_stops_at_the_next_change_of_liquid() -> None:
    points = (sweep_point("P1", 2.0), sweep_point("B1", 2.0, kind=PointKind.BLANK), sweep_point("P2", 1.0))
    found = planned(demo_recipe(points))
    index = next(i for i, phase in enumerate(found.phases) if phase.id == "switchover")
    assert [len(rows) for rows in found.following_mL(index).values()] == [1, 1]


def test_three_pumps_have_a_plan() -> None:
    recipe = demo_recipe((sweep_point("P1", 3.0, "ABC"),))
    found = planned(replace(recipe, leak_test=None), three_pumps())
    assert math.isfinite(found.duration_s)
    assert found.used_mL["feed-C"] > 1.0


def test_variance_of_a_tube_after_taylor_and_aris() -> None:
    """Radius 0.25 mm, 1 m, 1 mL/min, D 1e-9: u = 0.08488 m/s, D_e = R^2 u^2/(48 D), capped at one mixed tank."""
    tube = Segment("L", "line", 0.19635, 0.5, 1000.0, 1.0)
    assert relative_variance(tube, 1.0) == pytest.approx(2 * (0.25e-3**2 * 0.084883**2 / 48e-9) / 0.084883, rel=1e-4)
    assert relative_variance(tube, 1000.0) == 1.0


def test_variance_of_a_packed_bed() -> None:
    """Design rule Bo = 0.5 L/d_p: 100 mm of 0.2 mm beads has Bo 250."""
    assert relative_variance(Segment("C", "column", 1.9, 6.6, 100.0, 1.0), 1.0, bead_mm=0.2) == pytest.approx(2 / 250)


def test_time_to_99_percent_lies_between_plug_flow_and_one_tank() -> None:
    layout = make_layout(compile_program(two_pumps(), demo_recipe()))
    point = sweep_point("P", 1.0)
    assert tanks(layout, point) > 20
    assert 1.0 < settle_volumes_99(layout, point) < 1.7
