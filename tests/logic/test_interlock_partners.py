"""Partners that disagree, and start-up overrides.

Sources: text below the voting table in this project's references ("two channels good but disagreeing ..."), own
proposal; start-up override after IEC 61511-1:2016 cl. 10.3 (clause from memory): named, timed, and can only end.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import pytest
from fakes.rehearsal import Rehearsal, StandIn, sequence_demand
from fakes.rigs import BED_HOT, PRESSURE_HIGH, SENSORS, S, program_of, sensor, two_pump_rig
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd.logic.demand import PumpDemand
from rigd.logic.program import Program
from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.interlock_vote import vote
from rigd.model.events import EventKind
from rigd.model.orders import Stop, Verb
from rigd.model.protection import Armed, Condition, ConditionKind, Interlock, OnBad

APART = Condition(ConditionKind.DISCREPANCY, "PT-1", 2.0, reference="PT-2")
PAIRED = replace(PRESSURE_HIGH, witnesses=(APART,), discord_ns=10 * S)
FLOWING = sequence_demand(pumps={"PU-A": PumpDemand(1.0)})
LOW = Interlock(
    "PRESSURE-LOW",
    "No pressure while a pump runs",
    (Condition(ConditionKind.LOW, "PT-1", 0.8),),
    Stop.CUT,
    armed=Armed.RUNNING,
    startup_ns=20 * S,
)


def ready(*locks: Interlock, demand=None, **options) -> Rehearsal:
    stand_in = StandIn(demand)
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=locks, alarms=()), **options), stand_in)
    rehearsal.pump("PU-A").level_mL = 5.0
    rehearsal.ready()
    return rehearsal


def trips(rehearsal: Rehearsal) -> list[str]:
    return [event.subject for event in rehearsal.happened(EventKind.TRIP)]


def test_partners_that_disagree_for_too_long_trip_under_policy_t() -> None:
    rehearsal = ready(PAIRED)
    rehearsal.sensors["PT-1"] = 6.5
    rehearsal.sensors["PT-2"] = 3.0
    rehearsal.run(9.5)
    assert trips(rehearsal) == []
    rehearsal.run(1.5)
    assert trips(rehearsal) == ["PRESSURE-HIGH"]
    text = rehearsal.happened(EventKind.TRIP)[0].text
    assert "PT-1 read 6.5 bar, more than 2 away from PT-2 (3 bar)" in text


def test_partners_that_disagree_leave_a_degraded_voting_under_policy_n() -> None:
    rehearsal = ready(replace(PAIRED, on_bad=OnBad.IGNORE))
    rehearsal.sensors["PT-1"] = 6.5
    rehearsal.sensors["PT-2"] = 3.0
    rehearsal.run(11.0)
    assert "1oo2 degraded to 1oo1" in rehearsal.happened(EventKind.INTERLOCK)[-1].text
    rehearsal.sensors["PT-1"] = 8.5  # the worse one is believed
    rehearsal.run(0.7)
    assert trips(rehearsal) == ["PRESSURE-HIGH"]


def test_a_short_disagreement_changes_nothing() -> None:
    rehearsal = ready(PAIRED)
    for _ in range(5):
        rehearsal.sensors["PT-1"] = 6.5
        rehearsal.run(8.0)
        rehearsal.sensors["PT-1"] = 1.0
        rehearsal.run(2.0)
    assert trips(rehearsal) == []


THREE = replace(
    PRESSURE_HIGH,
    causes=tuple(Condition(ConditionKind.HIGH, tag, 8.0) for tag in ("PT-1", "PT-2", "PT-3")),
    votes=2,
    witnesses=tuple(
        Condition(ConditionKind.DISCREPANCY, a, 2.0, reference=b)
        for a, b in (("PT-1", "PT-2"), ("PT-1", "PT-3"), ("PT-2", "PT-3"))
    ),
    discord_ns=10 * S,
)
THIRD = sensor("PT-3", "pressure", "bar", 0.0, 25.0, S // 5, S)


@pytest.mark.parametrize(
    ("on_bad", "apart", "active", "equivalent", "demand"),
    [
        # rows of the voting table for 2oo3 with 0, 1 and 2 channels that cannot be believed
        (OnBad.TRIP, [], [0], "2oo3", False),
        (OnBad.TRIP, [0, 1], [], "1oo2", False),  # PT-1 against both others
        (OnBad.TRIP, [0, 1], [1], "1oo2", True),
        (OnBad.IGNORE, [0, 1], [1], "2oo2", False),
        (OnBad.IGNORE, [0, 1], [1, 2], "2oo2", True),
        (OnBad.TRIP, [0], [], "2oo3", False),  # PT-3 lies between the two
        (OnBad.TRIP, [0, 1, 2], [], "tripped", True),  # all apart: one is believed, two are bad
        (OnBad.IGNORE, [0, 1, 2], [], "NO PROTECTION (forbidden)", True),
    ],
)
def test_which_of_three_is_not_believed(
    on_bad: OnBad, apart: list[int], active: list[int], equivalent: str, demand: bool
) -> None:
    lock = replace(THREE, on_bad=on_bad)
    program = program_of(two_pump_rig(interlocks=(lock,), alarms=(), sensors=(*SENSORS, THIRD)))
    channels = [Channel.CLEAR] * len(program.watches)
    for index in [*active, *(3 + pair for pair in apart)]:
        channels[index] = Channel.ACTIVE
    heard = vote(program, lock, Conditions(tuple(channels)), running=True, discord=bool(apart))
    assert (heard.rule.equivalent, heard.demand) == (equivalent, demand)


@cache
def three(votes: int, on_bad: OnBad) -> tuple[Interlock, Program]:
    lock = replace(THREE, votes=votes, on_bad=on_bad)
    return lock, program_of(two_pump_rig(interlocks=(lock,), alarms=(), sensors=(*SENSORS, THIRD)))


STATES = st.sampled_from([Channel.CLEAR, Channel.ACTIVE, Channel.BAD, Channel.BAD_ACTIVE])


@settings(max_examples=200, deadline=None)
@given(st.lists(STATES, min_size=6, max_size=6), st.integers(1, 3), st.sampled_from(list(OnBad)))
def test_disagreement_never_takes_a_demand_back(states: list[Channel], votes: int, on_bad: OnBad) -> None:
    lock, program = three(votes, on_bad)
    channels = Conditions((*states, *[Channel.CLEAR] * (len(program.watches) - 6)))
    before = vote(program, lock, channels, running=True)
    after = vote(program, lock, channels, running=True, discord=True)
    assert after.demand or not before.demand
    assert vote(program, lock, channels, running=True, overridden=True).demand <= before.demand


def test_a_startup_override_lets_the_pressure_build_up_and_ends_by_itself() -> None:
    rehearsal = ready(LOW, demand=FLOWING)
    rehearsal.sensors["PT-1"] = 0.1
    rehearsal.run(15.0)
    assert trips(rehearsal) == []
    assert any("start-up override for 20 s" in event.text for event in rehearsal.happened(EventKind.INTERLOCK))
    rehearsal.run(10.0)
    assert trips(rehearsal) == ["PRESSURE-LOW"]


def test_a_startup_override_is_not_renewed_by_stopping_and_starting() -> None:
    rehearsal = ready(LOW, demand=FLOWING)
    rehearsal.run(12.0)
    rehearsal.conduct.want = sequence_demand(pumps={"PU-A": PumpDemand(0.0)})
    rehearsal.run(12.0)
    rehearsal.conduct.want = FLOWING
    rehearsal.sensors["PT-1"] = 0.1
    rehearsal.run(2.0)
    assert trips(rehearsal) == ["PRESSURE-LOW"]
    rehearsal.conduct.want = None
    rehearsal.run(5.0)
    assert rehearsal.ask(Verb.RESET, "*").fields["result"] == "accepted"
    rehearsal.conduct.want = FLOWING
    rehearsal.run(10.0)
    assert trips(rehearsal) == ["PRESSURE-LOW"]  # a reset by a person gives a new one


def test_a_startup_override_hides_no_bad_channel() -> None:
    rehearsal = ready(LOW, demand=FLOWING)
    rehearsal.run(1.0)
    rehearsal.silent.add("PT-1")
    rehearsal.run(3.0)
    assert trips(rehearsal) == ["PRESSURE-LOW"]


@settings(max_examples=6, deadline=None)
@given(st.lists(st.tuples(st.booleans(), st.integers(1, 15)), max_size=8))
def test_a_startup_override_can_only_end(spans: list[tuple[bool, int]]) -> None:
    rehearsal = ready(LOW, BED_HOT, demand=FLOWING)
    rehearsal.run(21.0)
    assert not rehearsal.state.protect.interlocks.states["PRESSURE-LOW"].overridden
    for runs, seconds in spans:
        rehearsal.conduct.want = sequence_demand(pumps={"PU-A": PumpDemand(1.0 if runs else 0.0)})
        rehearsal.run(float(seconds))
        assert not rehearsal.state.protect.interlocks.states["PRESSURE-LOW"].overridden
