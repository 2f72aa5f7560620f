"""How a faulted night is judged, and what the proof claims from many."""

from __future__ import annotations

import math

import pytest

from rigd.console.proof_view import told
from rigd.model.events import Event, EventKind
from rigd.prove.expected import HAZARDS, STRENGTH, expected
from rigd.prove.judge import HELD, MISSED, TOLD, UNSEEN, Night, _news, _restarted, _still_moving, _stop_class
from rigd.prove.proof import SIZES, Healthy, bound, counted, spread
from rigd.prove.witness import DANGEROUS, HARMLESS, SPOILS
from rigd_sim.faults import fault_kinds


def night(verdict: str = HELD, phase: str = "P1", kind: str = "block", **more: object) -> Night:
    base: dict[str, object] = {
        "kind": kind, "target": "L-4", "magnitude": 1.0, "phase": phase, "seed": 1, "verdict": verdict, "why": "",
        "stop": "cut", "first_out": "PRESSURE-HIGH", "first_s": 4.2, "stopped_s": 5.0, "peak_share": 0.5,
        "peak_part": "COL", "alarms": (),
    }  # fmt: skip
    return Night(**{**base, **more})  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("hazards", "decided", "stop", "words"),
    [
        (("H2",), "cut", "cut", ""),
        (("H12",), "hold", "hold", "less than"),
        (("H15",), "quench", "quench", ""),
        (("H15",), "quench", "cut", ""),  # a quench that could not be carried out
        (("H15",), "cut", "cut", "more than"),
        (("H7",), "cut", "cut", "more than"),
        (("H7",), "none", "none", ""),
        (("H24",), "hold", "hold", ""),
    ],
)
def test_class_of_stop(hazards: tuple[str, ...], decided: str, stop: str, words: str) -> None:
    found = _stop_class(decided, stop, expected(hazards))
    assert bool(found) is bool(words)
    assert words in "".join(found)


def test_a_stop_that_the_true_pressure_asked_for_is_no_over_reaction() -> None:
    """Found by a bubble in the shut path of the leak test (seed 1): the true pressure passed the limit."""
    assert _stop_class("cut", "cut", expected(("H7",)), asked=True) == []
    assert _stop_class("cut", "cut", expected(("H7",)), asked=False) != []
    assert _stop_class("hold", "hold", expected(("H12",)), asked=True) != []


@pytest.mark.parametrize(
    ("hazard", "stop", "words"),
    [("H2", "cut", "after the cut"), ("H5", "hold", "after the hold"), ("H2", "hold", ""), ("H15", "quench", "")],
)
def test_liquid_that_moves_after_a_stop(hazard: str, stop: str, words: str) -> None:
    """A hold keeps the flow, as a rule; for a leak it must end it."""
    found = _still_moving(stop, ["PU-A"], expected((hazard,)))
    assert bool(found) is bool(words)
    assert words in "".join(found)
    assert _still_moving(stop, [], expected((hazard,))) == []


def test_a_start_that_is_taken_before_a_reset_is_missed() -> None:
    fields = {"request_id": "afterwards-0", "result": "accepted"}
    taken = Event(EventKind.REQUEST, "start", 9, "", fields)
    refused = Event(EventKind.REQUEST, "start", 9, "", {**fields, "result": "refused"})
    trip = Event(EventKind.TRIP, "PRESSURE-HIGH", 5, "")
    assert _restarted([trip, taken], [trip]) != []
    assert _restarted([trip, refused], [trip]) == []


def test_every_hazard_of_every_fault_has_an_answer_and_every_size_a_kind() -> None:
    kinds = fault_kinds()
    assert {h for kind in kinds for h in kind.hazards} <= set(HAZARDS)
    assert set(SIZES) <= {kind.kind for kind in kinds}
    for row in HAZARDS.values():
        assert row.stops <= set(STRENGTH)
        assert row.add


@pytest.mark.parametrize(("nights", "limit"), [(30, 0.095), (100, 0.030), (1000, 0.0030), (3000, 0.0010)])
def test_bound_of_no_miss_in_n(nights: int, limit: float) -> None:
    """1 - 0.05^(1/n), about 3/n (rule of three: J. A. Hanley, A. Lippman-Hand, JAMA 249 (1983) 1743)."""
    assert bound(0, nights) == pytest.approx(limit, rel=0.02)
    assert bound(0, nights) == pytest.approx(3 / nights, rel=0.06)
    assert bound(1, nights) > bound(0, nights)


def test_what_is_told_names_misses_and_the_worst_of_each_cell() -> None:
    flow_meter = "a flow meter after the pump"
    nights = [
        night(),
        night(MISSED, why="COL came to 130 % of its rating", seed=2),
        night(UNSEEN, phase="P2", stop="none", first_s=math.nan, kind="slip", add=flow_meter, severity=HARMLESS),
        night(UNSEEN, stop="none", kind="slip", add=flow_meter, severity=SPOILS, harm="the flow is 10 % off"),
        night(TOLD, stop="none", kind="leak", alarms=("OPEN-PT-1",), severity=DANGEROUS, harm="5 mL ran out"),
    ]
    facts = told("rig", "recipe", ["P1", "P2"], nights, Healthy(2.0, ()))
    assert counted(nights) == {HELD: 1, TOLD: 1, UNSEEN: 2, MISSED: 1}
    assert [one["why"] for one in facts["missed"]] == ["COL came to 130 % of its rating"]
    (slip,) = facts["unseen"]
    assert (slip["nights"], slip["severity"], slip["add"]) == (2, SPOILS, flow_meter)
    assert slip["by_severity"] == {HARMLESS: 1, SPOILS: 1}
    assert slip["harm"] == "the flow is 10 % off"
    (leak,) = facts["told"]
    assert (leak["severity"], leak["alarms"]) == (DANGEROUS, ["OPEN-PT-1"])
    assert facts["dangerous"] == 1
    assert "leak" in facts["danger_words"]
    styles = {row["kind"]: [cell["style"] for cell in row["cells"]] for row in facts["matrix"]}
    assert styles == {"block": ["missed", ""], "leak": ["told", ""], "slip": ["unseen", "unseen"]}
    assert "1 of 5" in facts["words"]


@pytest.mark.parametrize(
    ("verdict", "spurious", "held"),
    [(HELD, (), True), (UNSEEN, (), True), (MISSED, (), False), (HELD, ("BED-HOT",), False)],
)
def test_all_held_means_no_miss_and_no_spurious_trip(verdict: str, spurious: tuple[str, ...], held: bool) -> None:
    one = night(verdict, severity=HARMLESS)
    assert told("rig", "recipe", ["P1"], [one], Healthy(2.0, spurious))["all_held"] is held


def test_an_alarm_tells_of_a_fault_only_if_it_sounds_and_a_healthy_night_has_it_not() -> None:
    def alarm(name: str, announce: str) -> Event:
        return Event(EventKind.ALARM, name, 5, "", {"announce": announce})

    events = [alarm("A", "-"), alarm("B", "off"), alarm("C", "new"), alarm("D", "again"), alarm("E", "new")]
    assert _news(events, frozenset({"E"})) == ("C", "D")


def test_parts_to_try_are_spread_over_the_rig() -> None:
    assert spread(("a", "b", "c", "d", "e"), 1) == ("c",)
    assert spread(("a", "b", "c", "d"), 2) == ("b", "d")
    assert spread(("a", "b"), 9) == ("a", "b")
    assert spread((), 1) == ()
