"""Residence by integrated flow, against the recomputed linear flow ramp (plug flow): Q0 1 mL/min, b -0.015 mL/min2,
V 1 mL; mapping as in Moore & Jensen, Angew. Chem. Int. Ed. 53 (2014) 470."""

from __future__ import annotations

import pytest
from fakes.conduct_rigs import three_pumps, two_pumps

from rigd.logic.estimators import FlowHistory, Front, place_on_trunk, residences_s, turnovers
from rigd.logic.flow_path import flow_path

MINUTE_NS = 60_000_000_000
SECOND_NS = 1_000_000_000


def ramp_mL(t_min: float) -> float:
    return t_min - 0.0075 * t_min**2 if t_min > 0 else t_min


def history(until_min: float, step_s: float = 1.0, start_min: float = -5.0) -> FlowHistory:
    kept = FlowHistory(keep_mL=4.0)
    for i in range(int((until_min - start_min) * 60 / step_s) + 1):
        t_min = start_min + i * step_s / 60
        kept = kept.add(round((t_min + 5) * MINUTE_NS), ramp_mL(t_min) + 5)
    return kept


RAMP = [(5, 1.071767416), (10, 1.164505243), (20, 1.407350340), (40, 2.392659624), (60, 6.666666667)]


@pytest.mark.parametrize(("t_min", "tau_min"), RAMP)
def test_linear_flow_ramp(t_min: float, tau_min: float) -> None:
    """The polyline keeps 2e-4 mL, so the tolerance is that over the flow, a few parts in a thousand at the slow end."""
    now = round((t_min + 5) * MINUTE_NS)
    entered = history(t_min).entered_ns(now, 1.0)
    assert entered is not None
    assert (now - entered) / MINUTE_NS == pytest.approx(tau_min, rel=3e-3)


DELAYED = [(10, 9.706641698, 1.158627612), (30, 29.548237581, 1.754583547), (60, 57.847495630, 5.710492108)]


@pytest.mark.parametrize(("t_min", "exit_min", "tau_min"), DELAYED)
def test_dead_volume_before_the_detector(t_min: float, exit_min: float, tau_min: float) -> None:
    kept = history(t_min)
    now = round((t_min + 5) * MINUTE_NS)
    exit_ns = kept.entered_ns(now, 0.25)
    assert exit_ns is not None
    assert exit_ns / MINUTE_NS - 5 == pytest.approx(exit_min, abs=0.01)
    entered_ns = kept.entered_ns(exit_ns, 1.0)
    assert entered_ns is not None
    assert (exit_ns - entered_ns) / MINUTE_NS == pytest.approx(tau_min, rel=4e-3)


def test_step_up_of_flow_is_exact() -> None:
    """0.1 -> 1 mL/min with V 1 mL: tau at 0.25/0.5/0.75/1.0 min after the step is 7.75/5.5/3.25/1.0 min."""
    kept = FlowHistory(3.0).add(0, 0.0).add(20 * MINUTE_NS, 2.0)
    for minutes, expected in ((0.25, 7.75), (0.5, 5.5), (0.75, 3.25), (1.0, 1.0)):
        now = round((20 + minutes) * MINUTE_NS)
        entered = kept.add(now, 2.0 + minutes).entered_ns(now, 1.0)
        assert entered is not None
        assert (now - entered) / MINUTE_NS == pytest.approx(expected)


def test_constant_flow_keeps_few_knots() -> None:
    kept = FlowHistory(3.0)
    for second in range(3600):
        kept = kept.add(second * SECOND_NS, second * 0.1 / 60)
    assert len(kept.knots) < 70
    assert kept.entered_ns(3599 * SECOND_NS, 1.0) == pytest.approx(2999 * SECOND_NS, rel=1e-4)


def test_memory_is_bounded_by_volume() -> None:
    kept = history(40)
    assert kept.knots[-1][1] - kept.knots[1][1] < 4.5
    assert kept.time_at(0.0) is None


def test_residence_in_each_segment_at_constant_flow() -> None:
    path = flow_path(two_pumps())
    kept = FlowHistory(10.0).add(0, 0.0).add(10 * MINUTE_NS, 10.0)
    found = residences_s(path, (kept,), "IR", 10 * MINUTE_NS)
    assert found is not None
    assert list(found) == ["IR", "L-2", "COL", "L-1", "TEE"]
    assert found["COL"] == pytest.approx(60 * path.column_mL)
    assert sum(found.values()) == pytest.approx(60 * path.past_part_mL("IR"))


def test_residence_not_remembered() -> None:
    path = flow_path(two_pumps())
    kept = FlowHistory(10.0).add(0, 0.0).add(MINUTE_NS, 0.5)
    assert residences_s(path, (kept,), "IR", MINUTE_NS) is None


def test_front_reaches_its_merge() -> None:
    feed = flow_path(two_pumps()).feed("PU-B")
    front = Front("feed-B", 3.0)
    assert front.to_merge_mL(feed, 3.1) == pytest.approx(feed.outlet_mL - 0.1)
    assert front.to_merge_mL(feed, 3.2) == 0.0


def test_place_on_trunk() -> None:
    path = flow_path(two_pumps())
    assert place_on_trunk(path, 0.001) == "TEE"
    assert place_on_trunk(path, 1.0) == "COL"
    assert place_on_trunk(path, 99.0) == "V-OUT"


def test_turnovers_of_one_section_are_volume_over_volume() -> None:
    path = flow_path(two_pumps())
    assert turnovers(path, {"PU-A": 1.0, "PU-B": 2.0}) == pytest.approx(3.0 / path.trunk_mL)


def test_turnovers_of_two_sections_are_time_over_residence() -> None:
    path = flow_path(three_pumps())
    flows = {"PU-A": 0.5, "PU-B": 0.5, "PU-C": 1.0}
    minutes = 7.0
    delivered = {pump: flow * minutes for pump, flow in flows.items()}
    assert turnovers(path, delivered) == pytest.approx(60 * minutes / path.residence_s(flows))
    assert turnovers(path, {"PU-C": 5.0}) == 0.0
