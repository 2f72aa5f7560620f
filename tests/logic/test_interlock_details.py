"""Details of interlocks that only a close look shows: order of causes, defaults, times at their edges, notes."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.rigs import SENSORS, S, program_of, sensor, two_pump_rig

from rigd.logic.protect import bypass, interlocks
from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.interlock_vote import vote
from rigd.logic.protect.interlocks import Bypass, Change, Running
from rigd.logic.protect.timers import NEVER_NS, Delay
from rigd.model.orders import Request, Stop, Verb
from rigd.model.protection import Armed, Condition, ConditionKind, Interlock, OnBad

PAIR = Interlock(
    "PAIR",
    "two channels",
    (Condition(ConditionKind.HIGH, "PT-1", 8.0), Condition(ConditionKind.HIGH, "PT-2", 8.0)),
    Stop.CUT,
    witnesses=(Condition(ConditionKind.DISCREPANCY, "PT-1", 2.0, reference="PT-2"),),
    discord_ns=10 * S,
)
PROGRAM = program_of(two_pump_rig(interlocks=(PAIR,), alarms=()))


def channels(*first: Channel, **since_ns: int) -> Conditions:
    rest = [Channel.CLEAR] * (len(PROGRAM.watches) - len(first))
    return Conditions((*first, *rest), {int(index[1:]): at for index, at in since_ns.items()})


def test_the_oldest_cause_comes_first() -> None:
    both = channels(Channel.ACTIVE, Channel.ACTIVE, c0=20, c1=10)
    assert vote(PROGRAM, PAIR, both, running=True).causes == (1, 0)


def test_partners_that_disagree_count_only_once_they_did_so_for_too_long() -> None:
    apart = channels(Channel.CLEAR, Channel.CLEAR, Channel.ACTIVE)
    assert not vote(PROGRAM, PAIR, apart, running=True).demand
    assert vote(PROGRAM, PAIR, apart, running=True, discord=True).demand


LOCK = replace(PAIR, on_delay_ns=5 * S, clear_delay_ns=3 * S)


@pytest.mark.parametrize(
    ("state", "due_ns"),
    [
        (Running(), NEVER_NS),
        (Running(delay=Delay(False, 100)), 100 + 5 * S),
        (Running(delay=Delay(True, 100)), 100 + 3 * S),
        (Running(discord=Delay(False, 100)), 100 + 10 * S),
        (Running(discord=Delay(True, 100)), 100 + 3 * S),
        (Running(bypass=Bypass("x", "y", 77)), 77),
        (Running(delay=Delay(False, 100), bypass=Bypass("x", "y", 77)), 77),
        (Running(override_ns=55), NEVER_NS),
        (Running(override_ns=55, overridden=True), 55),
        (Running(degraded_ns=44), 44),
        (Running(degraded_ns=44, delay=Delay(True)), NEVER_NS),  # it has tripped for that already
    ],
)
def test_when_an_interlock_changes_by_itself(state: Running, due_ns: int) -> None:
    assert state.due_ns(LOCK) == due_ns


class Engine:
    """The interlocks of a small rig, fed with channels by hand; all were reset before the test begins."""

    def __init__(self, *locks: Interlock, ready: bool = True, **options) -> None:
        rig = two_pump_rig(interlocks=locks, alarms=(), sensors=(*SENSORS, THIRD))
        self.program = program_of(rig, **options)
        self.channels = [Channel.CLEAR] * len(self.program.watches)
        self.since: dict[int, int] = {}
        self.now_ns = 0
        self.state = interlocks.initial(self.program, 0)
        self.changes: list[Change] = []
        if ready:
            self.step(1)
            self.reset()

    def reset(self) -> None:
        conditions = Conditions(tuple(self.channels), self.since)
        self.state, _, refusal = interlocks.reset(self.program, self.state, conditions, "*", "x")
        assert refusal == ""

    def set(self, lock: str, index: int, channel: Channel, since_ns: int | None = None) -> None:
        watch = self.program.causes[lock][index]
        self.channels[watch.index] = channel
        self.since.pop(watch.index, None)
        if channel is not Channel.CLEAR:
            self.since[watch.index] = self.now_ns if since_ns is None else since_ns

    def step(self, after_ns: int = S, *, running: bool = False, touched: tuple[str, ...] | None = None) -> list[Change]:
        self.now_ns += after_ns
        names = tuple(self.program.causes) if touched is None else touched
        conditions = Conditions(tuple(self.channels), self.since)
        self.state, found = interlocks.advance(self.program, self.state, conditions, names, running, self.now_ns)
        self.changes += found
        return found

    def latch(self, lock: str) -> str:
        return str(self.state.states[lock].latch)


THIRD = sensor("PT-3", "pressure", "bar", 0.0, 25.0, S // 5, S)


def one(name: str, stop: Stop = Stop.CUT, tag: str = "PT-1", **more) -> Interlock:
    return Interlock(name, name, (Condition(ConditionKind.HIGH, tag, 8.0),), stop, **more)


def test_figures_that_people_rely_on() -> None:
    assert interlocks.DEGRADED_NS == 30 * 60 * S
    assert bypass.LONGEST_S == 8 * 3600.0


def test_the_start_is_a_trip_of_everything_and_of_no_number() -> None:
    engine = Engine(one("A"), ready=False)
    assert engine.state == interlocks.Interlocks(engine.state.states, 0, "", 0, False, False, Stop.CUT, "", False)
    engine.set("A", 0, Channel.ACTIVE)
    (change,) = engine.step()
    assert (change.number, engine.state.first_out, engine.state.count) == (0, "", 0)
    assert (engine.state.released, engine.state.permit, engine.state.level) == (False, False, Stop.CUT)


def test_a_wish_to_stop_is_first_out_even_before_the_first_reset() -> None:
    engine = Engine(one("A"), ready=False)
    engine.set("CUT-REQUEST", 0, Channel.ACTIVE)
    found = engine.step()
    assert [(change.interlock.id, change.number) for change in found if change.number] == [("CUT-REQUEST", 1)]
    assert engine.state.first_out == "CUT-REQUEST"


def test_what_counts_only_while_running_is_judged_when_the_running_begins() -> None:
    engine = Engine(one("A", armed=Armed.RUNNING), one("B"))
    engine.set("A", 0, Channel.ACTIVE)
    engine.step()
    assert engine.latch("A") == "healthy"
    engine.step(running=True, touched=())
    assert engine.latch("A") == "tripped active"


def test_an_override_begins_with_the_running_also_of_an_interlock_that_counts_always() -> None:
    engine = Engine(one("A", startup_ns=10 * S))
    (begun,) = engine.step(running=True, touched=())
    assert (begun.note, begun.number) == ("start-up override for 10 s", 0)
    engine.set("A", 0, Channel.ACTIVE)
    engine.step(9 * S, running=True)
    engine.step(S - 1, running=True)
    assert engine.latch("A") == "healthy"
    found = engine.step(1, running=True)
    assert [(change.note, change.number) for change in found] == [("", 1), ("end of its override", 0)]
    assert engine.latch("A") == "tripped active"


def test_who_raised_the_stop_stays_named_until_a_higher_one_does() -> None:
    engine = Engine(one("C", Stop.QUENCH, "PT-3"), one("B", Stop.QUENCH, "PT-2"), one("A", Stop.HOLD))
    named = []
    for lock in ("A", "B", "C", "CUT-REQUEST"):
        engine.set(lock, 0, Channel.ACTIVE)
        engine.step()
        named.append((engine.state.driver, engine.state.level, engine.state.first_out))
    assert named == [
        ("A", Stop.HOLD, "A"),
        ("B", Stop.QUENCH, "A"),
        ("B", Stop.QUENCH, "A"),
        ("CUT-REQUEST", Stop.CUT, "A"),
    ]
    for lock in ("A", "B", "C", "CUT-REQUEST"):
        engine.set(lock, 0, Channel.CLEAR)
    engine.step()
    engine.step(2 * S)
    assert engine.state.driver == "CUT-REQUEST"
    engine.reset()
    assert (engine.state.driver, engine.state.level, engine.state.first_out, engine.state.permit) == (
        "",
        Stop.NONE,
        "",
        True,
    )


def test_the_cause_that_came_first_names_the_first_out_whatever_else_its_interlock_saw() -> None:
    engine = Engine(one("B", tag="PT-3"), replace(PAIR, witnesses=(), discord_ns=0))
    engine.now_ns = 100
    engine.set("PAIR", 0, Channel.ACTIVE, 10)
    engine.set("PAIR", 1, Channel.ACTIVE, 50)
    engine.set("B", 0, Channel.ACTIVE, 20)
    found = engine.step()
    assert [(change.interlock.id, change.number) for change in found] == [("PAIR", 1), ("B", 2)]


LENIENT = replace(PAIR, witnesses=(), discord_ns=0, on_bad=OnBad.IGNORE)


def test_a_degraded_voting_says_why_it_trips_and_has_its_whole_time_anew_after_it_was_whole() -> None:
    engine = Engine(LENIENT)
    engine.set("PAIR", 0, Channel.BAD)
    engine.step()
    engine.step(interlocks.DEGRADED_NS - 1)
    assert engine.latch("PAIR") == "healthy"
    engine.set("PAIR", 0, Channel.CLEAR)
    engine.step()
    engine.set("PAIR", 0, Channel.BAD)
    engine.step()
    engine.step(interlocks.DEGRADED_NS - 1)
    assert engine.latch("PAIR") == "healthy"
    (tripped,) = engine.step(1)
    assert (tripped.note, engine.latch("PAIR")) == ("degraded to 1oo1 for too long", "tripped active")


def test_a_degraded_voting_trips_in_the_same_scan_when_nobody_is_there() -> None:
    engine = Engine(LENIENT, unattended=True)
    engine.set("PAIR", 0, Channel.BAD)
    tripped, noted = engine.step()
    assert "degraded to 1oo1" in noted.note
    assert tripped.after.value == "tripped active"


def test_a_demand_has_no_note_even_when_the_voting_was_degraded_for_too_long() -> None:
    engine = Engine(LENIENT)
    engine.set("PAIR", 0, Channel.BAD)
    engine.step()
    engine.set("PAIR", 1, Channel.ACTIVE)
    (tripped,) = engine.step(interlocks.DEGRADED_NS)
    assert tripped.note == ""


def test_two_of_three_pairs_apart_are_enough_to_find_the_one_that_is_wrong() -> None:
    tags = ("PT-1", "PT-2", "PT-3")
    pairs = (("PT-1", "PT-2"), ("PT-1", "PT-3"), ("PT-2", "PT-3"))
    three = Interlock(
        "THREE",
        "three",
        tuple(Condition(ConditionKind.HIGH, tag, 8.0) for tag in tags),
        Stop.CUT,
        votes=2,
        witnesses=tuple(Condition(ConditionKind.DISCREPANCY, a, 2.0, reference=b) for a, b in pairs),
        discord_ns=10 * S,
    )
    engine = Engine(three)
    for index in (3, 4):
        engine.set("THREE", index, Channel.ACTIVE)
    engine.step()
    engine.set("THREE", 1, Channel.ACTIVE)
    engine.step(10 * S - 1)
    assert engine.latch("THREE") == "healthy"  # 2oo3, one demands
    engine.step(1)
    assert engine.latch("THREE") == "tripped active"  # 1oo2: the wrong one is a vote to trip


def test_a_bypass_that_ends_into_a_trip_lets_the_cause_clear() -> None:
    engine = Engine(one("A", on_delay_ns=5 * S))
    asked = Request("r", Verb.BYPASS, "x", 0, "A", {"reason": "y", "duration_s": 10.0})
    conditions = Conditions(tuple(engine.channels))
    engine.state, _, refusal = bypass.grant(engine.program, engine.state, conditions, asked, engine.now_ns)
    assert refusal == ""
    engine.set("A", 0, Channel.ACTIVE)
    engine.step(9 * S)
    engine.step(S)
    assert engine.latch("A") == "tripped active"
    engine.set("A", 0, Channel.CLEAR)
    engine.step()
    engine.step()
    assert engine.latch("A") == "tripped clear"


@pytest.mark.parametrize(
    ("args", "granted"),
    [
        ({"duration_s": 0.5}, True),
        ({"duration_s": bypass.LONGEST_S}, True),
        ({"duration_s": bypass.LONGEST_S + 0.001}, False),
        ({"duration_s": 0.0}, False),
        ({}, False),
    ],
)
def test_how_long_a_bypass_may_last(args: dict[str, float], granted: bool) -> None:
    engine = Engine(one("A"))
    asked = Request("r", Verb.BYPASS, "x", 0, "A", {"reason": "y", **args})
    conditions = Conditions(tuple(engine.channels))
    assert (bypass.grant(engine.program, engine.state, conditions, asked, 0)[2] == "") is granted
