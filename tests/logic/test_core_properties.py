"""What holds for any history: monotone trips, alarms apart from interlocks, bypasses that end, stops that only rise."""

from __future__ import annotations

import hashlib
import itertools
import os
import subprocess
import sys
from dataclasses import dataclass, replace
from pathlib import Path

import pytest
from fakes.rehearsal import Rehearsal, StandIn, sequence_demand
from fakes.rigs import BED_HOT, PRESSURE_HIGH, PRESSURE_RISING, S, program_of, two_pump_rig
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd.logic.demand import PumpDemand
from rigd.logic.program import Program, compile_program
from rigd.logic.protect import conditions, interlock_vote, signals
from rigd.logic.protect.bypass import LONGEST_S
from rigd.logic.protect.conditions import Judge
from rigd.model.orders import Authority, Stop, Verb
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, OnBad, Priority
from rigd.model.samples import Sample

WARM = Interlock("WARM", "Bed warm", (Condition(ConditionKind.HIGH, "TT-2", 65.0),), Stop.HOLD)
PROGRAM = program_of(two_pump_rig(interlocks=(PRESSURE_HIGH, BED_HOT, WARM)))
WANT = sequence_demand(pumps={"PU-A": PumpDemand(1.0), "PU-B": PumpDemand(0.5)})


@dataclass(frozen=True)
class Deed:
    """One thing that happens, and the time until the next."""

    verb: Verb | None = None
    target: str = "*"
    sensor: str = ""
    value: float = 0.0
    wait_s: float = 1.0
    duration_s: float = 60.0


SENSED = st.builds(
    Deed,
    sensor=st.sampled_from(["PT-1", "PT-2", "TT-1", "TT-2"]),
    value=st.sampled_from([1.0, 7.0, 9.0, 30.0, 70.0, 90.0, float("nan")]),
    wait_s=st.sampled_from([0.1, 0.5, 2.0, 4.0]),
)
ASKED = st.builds(
    Deed,
    verb=st.sampled_from([Verb.STOP, Verb.CUT, Verb.RESET, Verb.RESET, Verb.BYPASS, Verb.END_BYPASS]),
    target=st.sampled_from(["*", "PRESSURE-HIGH", "BED-HOT", "WARM"]),
    wait_s=st.sampled_from([0.1, 2.0]),
    duration_s=st.sampled_from([1.0, 100.0, LONGEST_S]),
)
HISTORY = st.lists(st.one_of(SENSED, SENSED, ASKED), max_size=12)


def play(program: Program, deeds: list[Deed], acknowledged: str = "") -> Rehearsal:
    rehearsal = Rehearsal(program, StandIn(WANT))
    for name in ("PU-A", "PU-B"):
        rehearsal.pump(name).level_mL = 4.0
    rehearsal.ready()
    for deed in deeds:
        if deed.sensor:
            rehearsal.sensors[deed.sensor] = deed.value
        if deed.verb is not None:
            rehearsal.ask(deed.verb, deed.target, reason="invented", duration_s=deed.duration_s)
        if acknowledged:
            rehearsal.ask(Verb.ACKNOWLEDGE, acknowledged)
        rehearsal.run(deed.wait_s)
    return rehearsal


def demanded(votes: int, on_bad: OnBad, kind: ConditionKind, limit: float, values: list[float]) -> bool:
    """Whether an interlock over one tag per value asks for a trip, after the judging of one sample each."""
    tags = ("PT-1", "PT-2", "TT-1")[: len(values)]
    causes = tuple(Condition(kind, tag, limit) for tag in tags)
    lock = Interlock("X", "x", causes, Stop.CUT, votes=votes, on_bad=on_bad)
    program = compile_program(two_pump_rig(interlocks=(lock,), alarms=()), PROGRAM.recipe)
    samples = tuple(Sample(tag, value, 0) for tag, value in zip(tags, values, strict=True))
    image, taken = signals.take(program, signals.initial(0), samples, 0)
    judge = Judge(conditions.initial(program.watches), image.samples, lambda _: None, 0)
    for tag in taken:
        for watch in program.watching[tag]:
            judge.tag(watch)
    heard = interlock_vote.vote(program, lock, judge.result(), running=True)
    return heard.demand


@settings(max_examples=150, deadline=None)
@given(
    values=st.lists(st.floats(0.0, 200.0), min_size=1, max_size=3),
    raised=st.lists(st.floats(0.0, 500.0), min_size=3, max_size=3),
    data=st.data(),
    on_bad=st.sampled_from(list(OnBad)),
)
def test_a_more_extreme_value_never_takes_a_demand_back(
    values: list[float], raised: list[float], data: st.DataObject, on_bad: OnBad
) -> None:
    votes = data.draw(st.integers(1, len(values)))
    more = [value + extra for value, extra in zip(values, raised, strict=False)]
    if demanded(votes, on_bad, ConditionKind.HIGH, 8.0, values):
        assert demanded(votes, on_bad, ConditionKind.HIGH, 8.0, more)
    low = [25.0 - value for value in values]
    lower = [25.0 - value for value in more]
    if all(value <= 25.0 for value in low) and demanded(votes, on_bad, ConditionKind.LOW, 2.0, low):
        assert demanded(votes, on_bad, ConditionKind.LOW, 2.0, lower)


EXTRA = tuple(
    Alarm(f"A{i}", f"A{i}", Condition(ConditionKind.HIGH, tag, limit), Priority.LOW, "Look.", latching=bool(i % 2))
    for i, (tag, limit) in enumerate([("PT-1", 0.5), ("PT-2", 6.0), ("TT-1", 60.0), ("TT-2", 10.0)])
)
QUIET_PROGRAM = program_of(two_pump_rig(interlocks=(PRESSURE_HIGH, BED_HOT, WARM), alarms=()))
LOUD_PROGRAM = program_of(two_pump_rig(interlocks=(PRESSURE_HIGH, BED_HOT, WARM), alarms=(PRESSURE_RISING, *EXTRA)))


@settings(max_examples=25, deadline=None)
@given(deeds=HISTORY)
def test_alarms_and_their_acknowledgement_never_move_an_interlock(deeds: list[Deed]) -> None:
    quiet = play(QUIET_PROGRAM, deeds, "NONSENSE")
    loud = play(LOUD_PROGRAM, deeds, "*")
    assert [(o.unit, o.action, o.value, o.t_ns) for o in quiet.orders] == [
        (o.unit, o.action, o.value, o.t_ns) for o in loud.orders
    ]
    assert quiet.snapshot()["interlocks"] == loud.snapshot()["interlocks"]
    assert quiet.conduct.views[-1].verdict == loud.conduct.views[-1].verdict


@settings(max_examples=12, deadline=None)
@given(deeds=HISTORY)
def test_a_bypass_always_ends(deeds: list[Deed]) -> None:
    rehearsal = play(PROGRAM, deeds)
    rehearsal.now_ns += int(LONGEST_S * S)
    rehearsal.plant.now_ns = rehearsal.now_ns
    rehearsal.scan()
    assert "bypassed" not in rehearsal.snapshot()["interlocks"].values()


@settings(max_examples=25, deadline=None)
@given(deeds=HISTORY)
def test_stops_only_rise_between_resets_and_only_stops_order_while_tripped(deeds: list[Deed]) -> None:
    rehearsal = play(PROGRAM, deeds)
    views = rehearsal.conduct.views
    resets = {event.t_ns for event in rehearsal.events if event.fields.get("result") == "accepted"}
    for before, after in itertools.pairwise(views):
        if after.verdict.stop < before.verdict.stop:
            assert after.now_ns in resets
            assert after.verdict.stop is Stop.NONE
    verdicts = {view.now_ns: view.verdict for view in views}
    for order in rehearsal.orders:
        assert order.source
        if verdicts[order.t_ns].stop >= Stop.QUENCH:
            assert order.authority >= Authority.QUENCH
    assert [order.number for order in rehearsal.orders] == list(range(1, len(rehearsal.orders) + 1))


@settings(max_examples=15, deadline=None)
@given(deeds=HISTORY)
def test_the_same_history_gives_the_same_orders_and_events(deeds: list[Deed]) -> None:
    first, second = play(PROGRAM, deeds), play(program_of(PROGRAM.rig), deeds)
    assert first.orders == second.orders
    assert [repr(event) for event in first.events] == [repr(event) for event in second.events]


STORY = [
    Deed(sensor="TT-1", value=80.0, wait_s=4.0),
    Deed(sensor="PT-1", value=9.0, wait_s=1.0),
    Deed(sensor="PT-2", value=float("nan"), wait_s=2.0),
    Deed(sensor="PT-1", value=1.0),
    Deed(verb=Verb.RESET),
]


def story_digest() -> str:
    told = play(PROGRAM, STORY)
    return hashlib.sha256(repr((told.orders, told.events)).encode()).hexdigest()


@pytest.mark.parametrize("seed", ["0", "4711"])
def test_the_hash_seed_of_the_process_changes_nothing(seed: str) -> None:
    tests = Path(__file__).parents[1]
    code = "import test_core_properties as t; print(t.story_digest())"
    search = os.pathsep.join((str(tests), str(tests / "logic"), str(tests.parent)))
    environment = {**os.environ, "PYTHONHASHSEED": seed, "PYTHONPATH": search}
    ran = subprocess.run(
        [sys.executable, "-c", code], env=environment, capture_output=True, text=True, timeout=50, check=True
    )
    assert ran.stdout.strip() == story_digest()


def test_a_state_can_be_used_twice() -> None:
    """The core keeps nothing outside its state: a scan from an old state decides the same again."""
    rehearsal = play(PROGRAM, STORY[:1])
    state, now_ns = rehearsal.state, rehearsal.now_ns
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(1.0)
    after = (rehearsal.orders[-3:], rehearsal.events[-3:])
    again = replace_state(rehearsal, state, now_ns)
    again.run(1.0)
    assert [(o.unit, o.action, o.value) for o in again.orders[-3:]] == [(o.unit, o.action, o.value) for o in after[0]]
    assert [event.text for event in again.events[-3:]] == [event.text for event in after[1]]


def replace_state(rehearsal: Rehearsal, state: object, now_ns: int) -> Rehearsal:
    again = play(PROGRAM, STORY[:1])
    again.state = replace(state)  # type: ignore[type-var]
    assert again.now_ns == now_ns
    again.sensors.update(rehearsal.sensors)
    return again
