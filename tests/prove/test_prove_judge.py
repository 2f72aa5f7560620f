"""How a faulted night is judged, and what the proof claims from many."""

from __future__ import annotations

import math

import pytest

from rigd.console.proof_view import told
from rigd.model.events import Event, EventKind
from rigd.prove.expected import HAZARDS, STRENGTH, expected
from rigd.prove.judge import HELD, MISSED, UNSEEN, Night, _restarted, _stop_class
from rigd.prove.proof import SIZES, Healthy, bound, counted
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
        (("H6",), "hold", "hold", "less than"),
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
    nights = [
        night(),
        night(MISSED, why="COL came to 130 % of its rating", seed=2),
        night(UNSEEN, phase="P2", stop="none", first_s=math.nan, kind="slip", add="a flow meter after the pump"),
    ]
    facts = told("rig", "recipe", ["P1", "P2"], nights, Healthy(2.0, ()))
    assert counted(nights) == {HELD: 1, UNSEEN: 1, MISSED: 1}
    assert [one["why"] for one in facts["missed"]] == ["COL came to 130 % of its rating"]
    assert facts["unseen"] == [{"kind": "slip", "target": "L-4", "nights": 1, "add": "a flow meter after the pump"}]
    block, slip = facts["matrix"]
    assert [cell["style"] for cell in block["cells"]] == ["missed", ""]
    assert [cell["text"] for cell in slip["cells"]] == ["", "~"]
    assert "1 of 3" in facts["words"]
