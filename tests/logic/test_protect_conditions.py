"""Every kind of condition, with deadband, bad channels and settling; samples given one by one."""

from __future__ import annotations

import numpy as np
import pytest
from fakes.rigs import MS, S

from rigd.logic.protect.conditions import Channel, Conditions, Judge, Told, Watch, initial, slope_per_s, watches
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock
from rigd.model.samples import Quality, QualityCause, Sample

K = ConditionKind


class Bench:
    """One condition, fed by hand."""

    def __init__(self, condition: Condition) -> None:
        lock = Interlock("X", "x", (condition,), Stop.CUT)
        self.watch: Watch = watches((lock,), (), lambda c: c.tag)[0]
        self.state: Conditions = initial((self.watch,))
        self.samples: dict[str, Sample] = {}
        self.told: Told | None = None

    def give(self, value: float, t_ns: int = 0, tag: str = "T", quality: Quality = Quality.GOOD, **more) -> Channel:
        self.samples[tag] = Sample(tag, value, t_ns, quality, more.get("cause", QualityCause.NONE))
        judge = Judge(self.state, self.samples, lambda _: self.told, t_ns)
        judge.tag(self.watch)
        self.state = judge.result()
        return self.state.channels[0]


def test_unknown_until_seen() -> None:
    assert Bench(Condition(K.HIGH, "T", 8.0)).state.channels == (Channel.UNKNOWN,)


@pytest.mark.parametrize(
    ("kind", "series"),
    [
        (K.HIGH, [(7.9, 0), (8.0, 0), (8.01, 1), (7.7, 1), (7.6, 0), (7.9, 0), (8.1, 1)]),
        (K.LOW, [(8.1, 0), (8.0, 0), (7.99, 1), (8.3, 1), (8.4, 0), (8.1, 0), (7.9, 1)]),
    ],
)
def test_limits_with_deadband(kind: ConditionKind, series: list[tuple[float, int]]) -> None:
    bench = Bench(Condition(kind, "T", 8.0, deadband=0.4))
    assert [int(bench.give(value, t)) for t, (value, _) in enumerate(series)] == [state for _, state in series]


def test_an_active_condition_stays_active_through_a_bad_stretch() -> None:
    bench = Bench(Condition(K.HIGH, "T", 8.0, deadband=1.0))
    assert bench.give(8.5) is Channel.ACTIVE
    assert bench.give(0.0, 1, quality=Quality.BAD, cause=QualityCause.SENSOR_FAULT) is Channel.BAD_ACTIVE
    assert bench.give(7.5, 2) is Channel.ACTIVE
    assert bench.give(7.0, 3) is Channel.CLEAR
    assert bench.give(7.0, 4, quality=Quality.BAD, cause=QualityCause.STALE) is Channel.BAD


def test_beyond_the_span_on_the_tripping_side_is_a_demand() -> None:
    high = Bench(Condition(K.HIGH, "T", 8.0))
    assert high.give(30.0, quality=Quality.BAD, cause=QualityCause.OUT_OF_SPAN) is Channel.ACTIVE
    assert high.give(-5.0, quality=Quality.BAD, cause=QualityCause.OUT_OF_SPAN) is Channel.BAD_ACTIVE
    assert high.give(float("inf"), quality=Quality.BAD, cause=QualityCause.NOT_A_NUMBER) is Channel.ACTIVE
    assert high.give(float("nan"), quality=Quality.BAD, cause=QualityCause.NOT_A_NUMBER) is Channel.BAD_ACTIVE


def test_uncertain_is_used() -> None:
    bench = Bench(Condition(K.HIGH, "T", 8.0))
    assert bench.give(9.0, quality=Quality.UNCERTAIN, cause=QualityCause.OUT_OF_SPAN) is Channel.ACTIVE


def test_states() -> None:
    equals, differs = Bench(Condition(K.EQUALS, "T", 3.0)), Bench(Condition(K.DIFFERS, "T", 3.0))
    assert [int(equals.give(value)) for value in (1.0, 3.0, 2.0)] == [0, 1, 0]
    assert [int(differs.give(value)) for value in (3.0, 1.0, 3.0)] == [0, 1, 0]


def test_bad_is_a_condition_of_its_own() -> None:
    bench = Bench(Condition(K.BAD, "T"))
    assert bench.give(1.0) is Channel.CLEAR
    assert bench.give(1.0, quality=Quality.BAD, cause=QualityCause.STALE) is Channel.ACTIVE
    assert bench.give(1.0) is Channel.CLEAR


@pytest.mark.parametrize(
    ("kind", "cause"),
    [
        (K.STALE, QualityCause.STALE),
        (K.FROZEN, QualityCause.FROZEN),
        (K.OUT_OF_SPAN, QualityCause.OUT_OF_SPAN),
        (K.DIAGNOSTIC, QualityCause.SENSOR_FAULT),
    ],
)
def test_one_cause_of_bad_quality_is_a_condition_and_any_other_a_bad_channel(
    kind: ConditionKind, cause: QualityCause
) -> None:
    bench = Bench(Condition(kind, "T"))
    assert bench.give(1.0) is Channel.CLEAR
    assert bench.give(1.0, 1, quality=Quality.BAD, cause=QualityCause.LINK_LOST) is Channel.BAD
    assert bench.give(1.0, 2, quality=Quality.BAD, cause=cause) is Channel.ACTIVE
    assert bench.give(1.0, 3, quality=Quality.BAD, cause=QualityCause.LINK_LOST) is Channel.BAD_ACTIVE
    assert bench.give(1.0, 4, quality=Quality.UNCERTAIN, cause=cause) is Channel.CLEAR


def test_discrepancy_is_live_at_once_however_the_partner_moves() -> None:
    bench = Bench(Condition(K.DISCREPANCY, "T", 2.0, deadband=0.5, reference="P", settling_ns=100 * S))
    bench.samples["P"] = Sample("P", 3.0, 0)
    assert bench.give(6.5) is Channel.ACTIVE
    assert bench.give(4.6, 1) is Channel.ACTIVE
    assert bench.give(4.5, 2) is Channel.CLEAR
    bench.samples["P"] = Sample("P", 9.0, 3)
    assert bench.give(4.5, 4) is Channel.ACTIVE
    bench.samples["P"] = Sample("P", 9.0, 5, Quality.BAD, QualityCause.FROZEN)
    assert bench.give(4.5, 6) is Channel.BAD_ACTIVE


def test_a_mismatch_of_a_quantity_has_a_limit_and_no_lost_position() -> None:
    bench = Bench(Condition(K.MISMATCH, "T", 0.5))
    assert bench.give(-2.0) is Channel.CLEAR  # a set-point of -2 degC before anything was told
    bench.told = Told(20.0, settled_ns=10 * S)
    assert bench.give(-2.0, 9 * S) is Channel.CLEAR
    assert bench.give(20.5, 10 * S) is Channel.CLEAR
    assert bench.give(20.6, 11 * S) is Channel.ACTIVE


def test_slope_is_the_least_squares_slope_of_numpy() -> None:
    rng = np.random.default_rng(5)
    times_s = np.sort(rng.uniform(0, 10, 25))
    values = 3.0 - 0.7 * times_s + rng.normal(0, 0.2, 25)
    window = tuple((round(t * S), float(v)) for t, v in zip(times_s, values, strict=True))
    expected = np.polyfit([t / 1e9 for t, _ in window], values, 1)[0]
    assert slope_per_s(window) == pytest.approx(expected, rel=1e-9)
    assert slope_per_s(()) == 0.0
    assert slope_per_s(((5, 1.0), (5, 2.0))) == 0.0


@pytest.mark.parametrize(("limit", "sign"), [(0.5, 1.0), (-0.5, -1.0)])
def test_rate_rises_and_falls(limit: float, sign: float) -> None:
    bench = Bench(Condition(K.RATE, "T", limit, deadband=0.1, window_ns=2 * S))
    value, found = 5.0, []
    for step, slope in enumerate([0.0] * 15 + [0.6] * 15 + [0.45] * 15 + [0.2] * 15):
        value += sign * slope * 0.2
        found.append(int(bench.give(value, step * 200 * MS)))
    assert found[:15] == [0] * 15
    assert found[29] == 1
    assert found[44] == 1  # 0.45 is above the limit less the deadband
    assert found[59] == 0
    assert len(bench.state.windows[0]) <= 11


def test_rate_says_nothing_on_a_window_that_is_not_filled() -> None:
    bench = Bench(Condition(K.RATE, "T", 0.1, window_ns=10 * S))
    assert [int(bench.give(10.0 * t, t * 100 * MS)) for t in range(20)] == [0] * 20


def test_deviation_with_settling_after_the_set_point_moved() -> None:
    bench = Bench(Condition(K.DEVIATION, "T", 6.0, deadband=1.0, reference="SP", settling_ns=100 * S))
    assert bench.give(22.0, 0) is Channel.UNKNOWN
    bench.samples["SP"] = Sample("SP", 60.0, 0)
    assert bench.give(22.0, 1 * S) is Channel.CLEAR  # first seen counts as moved
    assert bench.give(22.0, 99 * S) is Channel.CLEAR
    assert bench.give(53.0, 101 * S) is Channel.ACTIVE
    assert bench.give(54.5, 102 * S) is Channel.ACTIVE
    assert bench.give(55.5, 103 * S) is Channel.CLEAR
    bench.samples["SP"] = Sample("SP", 20.0, 200 * S)
    assert bench.give(55.0, 201 * S) is Channel.CLEAR
    assert bench.give(55.0, 301 * S) is Channel.ACTIVE


def test_deviation_is_bad_when_either_tag_is() -> None:
    bench = Bench(Condition(K.DEVIATION, "T", 6.0, reference="SP"))
    bench.samples["SP"] = Sample("SP", 60.0, 0, Quality.BAD, QualityCause.STALE)
    assert bench.give(60.0) is Channel.BAD
    bench.samples["SP"] = Sample("SP", 60.0, 0)
    assert bench.give(60.0) is Channel.CLEAR
    assert bench.give(60.0, quality=Quality.BAD, cause=QualityCause.STALE) is Channel.BAD


def test_a_noisy_reference_does_not_blank_the_deviation_for_ever() -> None:
    bench = Bench(Condition(K.DEVIATION, "T", 6.0, reference="SP", settling_ns=10 * S))
    for second in range(12):
        bench.samples["SP"] = Sample("SP", 60.0 + (second % 2) * 0.5, second * S)
        found = bench.give(40.0, second * S)
    assert found is Channel.ACTIVE


def test_mismatch_only_after_the_feedback_must_agree() -> None:
    bench = Bench(Condition(K.MISMATCH, "T"))
    assert bench.give(1.0) is Channel.CLEAR  # told nothing yet
    bench.told = Told(0.0, settled_ns=5 * S)
    assert bench.give(-1.0, 2 * S) is Channel.CLEAR  # on its way
    assert bench.give(-1.0, 5 * S) is Channel.ACTIVE
    assert bench.give(0.0, 6 * S) is Channel.CLEAR
    bench.told = None
    assert bench.give(-2.0, 7 * S) is Channel.ACTIVE  # lost, whatever it was told
