"""The numbers behind the early rules against closed forms and the reference tables."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest
from fakes.conduct_rigs import two_pumps

from rigd.logic.early.balance import Compared, Meter, compare_level
from rigd.logic.early.compliance import Rise, compliance_mL_bar
from rigd.logic.early.heat import Bed, Warmth, unexplained_K
from rigd.logic.early.line import prior
from rigd.logic.early.outlook import LONGEST, remembered, time_left_s
from rigd.logic.early.path import bed, tube
from rigd.logic.early.viscosity import VISCOSITY_MPA_S, viscosity_mPa_s
from rigd.logic.protect.ledger import Ledger
from rigd.model.rig import Column, Packing
from rigd_sim.physics.properties import SOLVENTS

REFERENCE = Path(__file__).parents[1] / "reference"
S = 1_000_000_000


def rows(name: str) -> list[dict[str, str]]:
    lines = (REFERENCE / name).read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


@pytest.mark.parametrize("row", rows("tube_pressure_drop.csv"))
def test_a_tube_resists_as_in_the_table(row: dict[str, str]) -> None:
    found = tube(float(row["bore_mm"]), 1000 * float(row["length_m"]))
    expected = float(row["drop_Pa"]) / 1e5 / float(row["viscosity_mPa_s"]) / float(row["flow_mL_min"])
    assert found == pytest.approx(expected, rel=1e-6)


LAMINAR = [
    row
    for row in rows("bed_pressure_drop.csv")
    if row["liquid"] != "anchor"
    and float(row["reynolds"] or 1) < 0.2
    and row["correlation"] in ("ergun", "carman-kozeny")
]


@pytest.mark.parametrize("row", LAMINAR)
def test_a_bed_resists_as_in_the_table_where_the_flow_creeps(row: dict[str, str]) -> None:
    packing = Packing(
        "beads", False, float(row["bead_um"]) / 1000, float(row["voidage"]), correlation=row["correlation"]
    )
    column = Column("COL", float(row["bore_mm"]), float(row["length_mm"]), 40.0, packing)
    expected = float(row["drop_Pa"]) / 1e5 / float(row["viscosity_mPa_s"]) / float(row["flow_mL_min"])
    assert bed(column) == pytest.approx(expected, rel=0.01)  # the inertial term of Ergun is left out


def test_there_are_creeping_rows() -> None:
    assert len(LAMINAR) >= 2


@pytest.mark.parametrize("name", VISCOSITY_MPA_S)
def test_viscosities_are_those_of_the_simulator(name: str) -> None:
    for degC in (-10.0, 0.0, 22.0, 25.0, 45.0, 60.0, 80.0):
        expected = 1000.0 * SOLVENTS[name].viscosity(degC + 273.15)
        assert viscosity_mPa_s(VISCOSITY_MPA_S[name], degC) == pytest.approx(expected, rel=1e-6)


def test_three_exact_points_give_all_weights_and_fewer_leave_them_open() -> None:
    """2.1 bar + 2 * cold + 3 * warm."""
    one = prior(2.0, 0.5, 1.0, 10.0).learned(0.5, 0.2, 3.7, 1e-6)
    assert one.offset + one.flowing(0.5, 0.2) == pytest.approx(3.7, abs=1e-6)
    assert one.spread(0.5, 0.2) < 1e-4 < 0.05 < one.spread(0.1, 0.2)
    three = one.learned(0.1, 0.04, 2.42, 1e-6).learned(0.5, 0.1, 3.4, 1e-6)
    assert three.weights == (pytest.approx(2.1, abs=1e-3), pytest.approx(2.0, abs=1e-2), pytest.approx(3.0, abs=1e-2))
    assert three.spread(0.3, 0.3) < 1e-3


def grown(k_per_s: float, seconds: int = 600) -> tuple[tuple[int, float], ...]:
    history: tuple[tuple[int, float], ...] = ()
    for t in range(0, seconds, 5):
        excess = math.expm1(k_per_s * t) / math.expm1(k_per_s * seconds) if k_per_s else t / seconds
        history = remembered(history, t * S, 1.0 + excess)
    return history


def test_straight_and_exponential_growth_are_told_apart() -> None:
    """x' = s: the last tenth of a straight line takes a tenth of the time. x' = k x: a doubling takes ln 2 / k."""
    straight = time_left_s(grown(0.0), 3.0, 600 * S)
    assert straight == pytest.approx(600.0, rel=0.02)
    k = 0.006
    doubled = time_left_s(grown(k), 3.0, 600 * S)
    end = math.log1p(2.0 * math.expm1(k * 600)) / k
    assert doubled == pytest.approx(end - 600.0, rel=0.1)


def test_what_stands_still_falls_or_is_there_has_no_time_or_none_left() -> None:
    level = tuple((t * S, 2.0) for t in range(0, 600, 5))
    assert time_left_s(level, 3.0, 600 * S) is None
    assert time_left_s(tuple((t * S, 3.0 - t / 600) for t in range(0, 600, 5)), 4.0, 600 * S) is None
    assert time_left_s((), 3.0, 0) is None
    assert time_left_s(grown(0.0), 1.5, 600 * S) == 0.0


def test_a_step_that_creeps_has_no_time_but_growth_from_below_has() -> None:
    step = tuple((t * S, 1.0 if t < 300 else 4.0 + 0.0002 * t) for t in range(0, 600, 5))
    assert time_left_s(step, 8.0, 600 * S) is None
    assert time_left_s(grown(0.0), 8.0, 600 * S) is not None


def test_the_history_is_thinned_and_keeps_its_ends() -> None:
    history = grown(0.0, 20_000)
    assert len(history) <= LONGEST + 1
    assert history[0][0] == 0
    assert history[-1][0] == 19_995 * S
    assert list(history) == sorted(history)


def test_compliance_of_a_rise() -> None:
    """dP/dt = Q/C: 0.6 mL/min into 0.02 mL/bar is 0.5 bar/s; ends that bend do not count."""
    points = [(0, 2.0), (S // 5, 2.0)] + [((2 + i) * S // 5, 2.0 + 0.1 * i) for i in range(1, 21)] + [(5 * S, 4.0)] * 3
    assert compliance_mL_bar(Rise(0.6, tuple(points))) == pytest.approx(0.02, rel=0.01)
    assert compliance_mL_bar(Rise(0.6, tuple(points[:6]))) is None


def test_a_level_is_compared_over_enough_liquid() -> None:
    meter = Meter("LT-1", vessel="flask", least_mL=2.0)
    known, ratio = compare_level(meter, Compared(), 10.0, Ledger({"flask": 5.0}))
    assert ratio is None
    known, ratio = compare_level(meter, known, 11.0, Ledger({"flask": 6.5}))
    assert ratio is None
    known, ratio = compare_level(meter, known, 12.2, Ledger({"flask": 8.0}))
    assert ratio == pytest.approx(2.2 / 3.0)
    assert compare_level(meter, known, 14.2, Ledger({"flask": 10.0}))[1] == pytest.approx(1.0)


def test_a_bed_left_behind_by_its_cooling_bath_is_explained_and_a_hot_one_is_not() -> None:
    one, known = Bed("TT-1", ("CH.bath",)), Warmth(60.0, 0)
    read = {"TT-1": 58.0, "CH.bath": 40.0}
    known_after, over_K = unexplained_K(one, known, read.get, 22.0, 3.0, 60 * S)
    assert known_after == Warmth(60.0 - 1.2, 60 * S)
    assert over_K == pytest.approx(58.0 - 58.8 - 3.0)
    assert unexplained_K(one, None, {"TT-1": 58.0, "CH.bath": 50.0}.get, 22.0, 3.0, 0)[1] == pytest.approx(5.0)
    assert unexplained_K(one, known, {"TT-1": 58.0}.get, 22.0, 3.0, 0)[1] is None


def test_rigs_without_sensors_have_nothing_to_watch() -> None:
    from rigd.logic.early.watch import plan_of
    from rigd.logic.flow_path import flow_path

    rig = two_pumps()
    bare = type(rig)(**{**{f: getattr(rig, f) for f in rig.__dataclass_fields__}, "tags": ()})
    plan = plan_of(bare, None, flow_path(bare))
    assert (plan.stretches, plan.meters, plan.beds, plan.stiff) == ((), (), (), "")
