"""Shelving, suppression by design and out of service through the whole core, and the invariants of alarms.

The invariants are those that the notes to ANSI/ISA-18.2-2016 and IEC 62682 in this project's references list (2.4).
"""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.rehearsal import Rehearsal, StandIn
from fakes.rigs import BED_HOT, PRESSURE_HIGH, PRESSURE_RISING, S, program_of, two_pump_rig
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd.logic.protect import alarm_core, alarm_overlay, alarms
from rigd.logic.protect.alarm_core import AlarmEvent, AlarmState, Announce
from rigd.logic.protect.alarm_overlay import FlagEvent
from rigd.logic.protect.alarms import Wish
from rigd.logic.protect.conditions import Channel, Conditions
from rigd.model.events import Event, EventKind
from rigd.model.orders import Verb
from rigd.model.protection import Alarm, Condition, ConditionKind, Priority

QUICK = replace(PRESSURE_RISING, on_delay_ns=0, off_delay_ns=0)
QUIET_BELOW_0 = Condition(ConditionKind.LOW, "TT-2", 0.0)


def ready(alarm: Alarm = QUICK, **options) -> Rehearsal:
    rehearsal = Rehearsal(program_of(two_pump_rig(alarms=(alarm,)), **options), StandIn())
    rehearsal.ready()
    return rehearsal


def pressure(rehearsal: Rehearsal, value: float) -> None:
    rehearsal.sensors["PT-1"] = value
    rehearsal.run(0.5)


def shelve(rehearsal: Rehearsal, duration_s: float | str = 60.0, target: str = QUICK.id, **more) -> Event:
    return rehearsal.ask(Verb.SHELVE, target, **{"reason": "known", "duration_s": duration_s, **more})


def told(rehearsal: Rehearsal) -> list[tuple[str, str]]:
    """(state, announcement) of each record of the alarm."""
    found = [event for event in rehearsal.happened(EventKind.ALARM) if event.subject == QUICK.id]
    return [(str(event.fields["state"]), str(event.fields["announce"])) for event in found]


def shown(rehearsal: Rehearsal) -> list[str]:
    return [str(alarm["state"]) for alarm in rehearsal.snapshot()["alarms"]]


def test_a_shelved_alarm_is_not_told_and_what_still_stands_is_told_when_the_time_is_over() -> None:
    rehearsal = ready()
    answer = shelve(rehearsal, 60.0)
    assert answer.fields["result"] == "accepted"
    shelved = rehearsal.happened(EventKind.ALARM)[-1]
    assert shelved.text == "Column pressure near its limit (PRESSURE-RISING): shelved by someone for 1 min: known."
    assert (shelved.fields["by"], shelved.fields["reason"], shelved.fields["left_s"]) == ("someone", "known", 60.0)
    pressure(rehearsal, 7.0)
    assert told(rehearsal)[-1] == ("shelved", "-")
    hidden = rehearsal.happened(EventKind.ALARM)[-1]
    assert hidden.fields["hidden"] == "unacknowledged"
    assert "shelved; unacknowledged behind that, PT-1 read 7 bar" in hidden.text
    assert shown(rehearsal) == ["shelved"]
    rehearsal.run(58.0)
    assert told(rehearsal)[-1] == ("shelved", "-")
    rehearsal.run(2.0)
    assert told(rehearsal)[-1] == ("unacknowledged", "new")
    assert shown(rehearsal) == ["unacknowledged"]


def test_what_came_and_went_while_shelved_leaves_a_record_and_no_alarm() -> None:
    rehearsal = ready()
    shelve(rehearsal)
    pressure(rehearsal, 7.0)
    pressure(rehearsal, 1.0)
    assert [event.fields.get("hidden") for event in rehearsal.happened(EventKind.ALARM)][-2:] == [
        "unacknowledged",
        "normal",
    ]
    assert rehearsal.ask(Verb.UNSHELVE, QUICK.id).fields["result"] == "accepted"
    assert told(rehearsal)[-1] == ("normal", "-")
    assert shown(rehearsal) == []


def test_while_hidden_nobody_can_acknowledge_or_reset() -> None:
    rehearsal = ready(replace(QUICK, latching=True))
    pressure(rehearsal, 7.0)
    shelve(rehearsal)
    assert "shelved" in rehearsal.ask(Verb.ACKNOWLEDGE, QUICK.id).text
    pressure(rehearsal, 1.0)
    assert "shelved" in rehearsal.ask(Verb.RESET, QUICK.id).text
    rehearsal.ask(Verb.UNSHELVE, QUICK.id)
    assert told(rehearsal)[-1] == ("latched, unacknowledged", "new")


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({"duration_s": 0.0}, "at most 480 min"),
        ({"duration_s": 8 * 3600.0 + 1}, "at most 480 min"),
        ({"duration_s": "soon"}, "at most 480 min"),
        ({"duration_s": float("nan")}, "at most 480 min"),
        ({"duration_s": float("inf")}, "at most 480 min"),
        ({"reason": " "}, "a reason"),
        ({"who": " "}, "name"),
        ({"target": "NONSENSE"}, "no alarm"),
        ({"target": "STOP-UNCONFIRMED"}, "never shelved"),
    ],
)
def test_shelving_that_is_refused_says_why_and_hides_nothing(more: dict, words: str) -> None:
    rehearsal = ready()
    answer = shelve(rehearsal, **more)
    assert answer.fields["result"] == "refused"
    assert words in answer.text
    assert shown(rehearsal) == []


def test_shelving_is_extended_only_within_its_longest_time_in_all() -> None:
    rehearsal = ready(replace(QUICK, shelve_max_ns=100 * S))
    shelve(rehearsal, 60.0)
    rehearsal.run(30.0)
    assert shelve(rehearsal, 60.0).fields["result"] == "accepted"
    assert "at most 1.66667 min in all" in shelve(rehearsal, 71.0).text
    rehearsal.run(61.0)
    assert shown(rehearsal) == []
    assert "not shelved" in rehearsal.ask(Verb.UNSHELVE, QUICK.id).text


def test_suppression_by_design_follows_its_rule_and_a_rule_that_cannot_be_believed_hides_nothing() -> None:
    rehearsal = ready(replace(QUICK, suppress=QUIET_BELOW_0))
    rehearsal.sensors["TT-2"] = -5.0
    rehearsal.run(1.5)
    assert shown(rehearsal) == ["suppressed by design"]
    pressure(rehearsal, 7.0)
    assert told(rehearsal)[-1] == ("suppressed by design", "-")
    rehearsal.silent.add("TT-2")
    rehearsal.run(6.0)
    assert told(rehearsal)[-1] == ("unacknowledged", "new")
    rehearsal.silent.clear()
    rehearsal.run(1.5)
    rehearsal.sensors["TT-2"] = 5.0
    rehearsal.run(1.5)
    assert told(rehearsal)[-2:] == [("suppressed by design", "-"), ("unacknowledged", "new")]


def test_out_of_service_lasts_until_it_is_returned_and_is_shown_over_shelved() -> None:
    rehearsal = ready()
    pressure(rehearsal, 7.0)
    assert "a reason" in rehearsal.ask(Verb.REMOVE, QUICK.id).text
    assert "not out of service" in rehearsal.ask(Verb.RETURN, QUICK.id).text
    shelve(rehearsal, 30.0)
    assert rehearsal.ask(Verb.REMOVE, QUICK.id, reason="cable").fields["result"] == "accepted"
    assert "already" in rehearsal.ask(Verb.REMOVE, QUICK.id, reason="cable").text
    assert shown(rehearsal) == ["out of service"]
    rehearsal.run(40.0)
    assert shown(rehearsal) == ["out of service"]
    assert told(rehearsal)[-1] == ("out of service", "-")  # shelving ended behind it
    assert "name" in rehearsal.ask(Verb.RETURN, QUICK.id, who=" ").text
    assert rehearsal.ask(Verb.RETURN, QUICK.id).fields["result"] == "accepted"
    assert told(rehearsal)[-1] == ("unacknowledged", "new")


def test_an_alarm_that_stands_is_told_again_until_it_is_gone_and_not_while_hidden() -> None:
    rehearsal = ready(replace(QUICK, realarm_ns=60 * S))
    pressure(rehearsal, 7.0)
    rehearsal.run(58.0)
    assert told(rehearsal) == [("unacknowledged", "new")]
    rehearsal.run(2.0)
    assert told(rehearsal)[-1] == ("unacknowledged", "again")
    rehearsal.ask(Verb.ACKNOWLEDGE, QUICK.id)
    rehearsal.run(59.0)
    assert told(rehearsal)[-1] == ("acknowledged", "off")
    rehearsal.run(2.0)
    assert told(rehearsal)[-1] == ("unacknowledged", "again")
    count = len(told(rehearsal))
    shelve(rehearsal, 130.0)
    rehearsal.run(125.0)
    assert len(told(rehearsal)) == count + 1
    pressure(rehearsal, 1.0)
    rehearsal.run(100.0)
    assert told(rehearsal)[-1] == ("normal", "-")


def test_an_urgent_alarm_comes_back_after_half_an_hour_when_nobody_is_there() -> None:
    given = (QUICK, replace(QUICK, id="M", priority=Priority.MEDIUM), replace(QUICK, id="OWN", realarm_ns=7))
    repeats = {
        unattended: {alarm.id: alarm.realarm_ns for alarm in program.alarms}
        for unattended in (True, False)
        if (program := program_of(two_pump_rig(alarms=given), unattended=unattended))
    }
    assert [repeats[True][name] for name in (QUICK.id, "M", "OWN", "STOP-UNCONFIRMED")] == [1800 * S, 0, 7, 1800 * S]
    assert [repeats[False][name] for name in (QUICK.id, "M", "OWN", "STOP-UNCONFIRMED")] == [0, 0, 7, 0]


def test_an_interlocked_signal_whose_alarm_is_hidden_is_named_to_the_sequence() -> None:
    rehearsal = ready()
    shelve(rehearsal)
    assert rehearsal.state.protect.verdict.hidden_alarm == QUICK.id
    rehearsal.ask(Verb.UNSHELVE, QUICK.id)
    assert rehearsal.state.protect.verdict.hidden_alarm == ""
    other = ready(replace(QUICK, condition=Condition(ConditionKind.HIGH, "flask.volume", 225.0)))
    shelve(other)
    assert other.state.protect.verdict.hidden_alarm == ""


def test_a_restart_shows_rather_than_hides() -> None:
    rehearsal = ready()
    shelve(rehearsal)
    rehearsal.ask(Verb.REMOVE, QUICK.id, reason="cable")
    again = Rehearsal(rehearsal.program)
    assert all(state.flag is None for state in again.state.protect.alarms.states.values())


# invariants, as properties over the engine alone

PROGRAMS = {
    (latching, needs): program_of(
        two_pump_rig(
            interlocks=(PRESSURE_HIGH, BED_HOT),
            alarms=(
                replace(QUICK, latching=latching, needs_acknowledge=needs, realarm_ns=50 * S, shelve_max_ns=100 * S),
            ),
        )
    )
    for latching, needs in ((False, False), (False, True), (True, True))
}
STEPS = st.lists(
    st.tuples(
        st.sampled_from(["on", "off", "ack", "reset", "shelve", "unshelve", "remove", "return", "wait"]),
        st.integers(0, 70),
    ),
    max_size=40,
)


class History:
    """The engine under a list of steps; every change is kept."""

    def __init__(self, kind: tuple[bool, bool]) -> None:
        self.program = PROGRAMS[kind]
        self.alarms = alarms.initial(self.program)
        (self.watch,) = self.program.causes[QUICK.id]
        self.channels = [Channel.CLEAR] * len(self.program.watches)
        self.now_ns = 0
        self.changes: list[alarms.Change] = []
        self.refused = 0

    def step(self, what: str, after_s: int) -> None:
        self.now_ns += after_s * S
        if what in ("on", "off"):
            self.channels[self.watch.index] = Channel.ACTIVE if what == "on" else Channel.CLEAR
        self._look()
        refusal = ""
        if what in ("ack", "reset"):
            event = AlarmEvent.ACK if what == "ack" else AlarmEvent.RESET
            self.alarms, found, refusal = alarms.request(self.program, self.alarms, event, QUICK.id, "x", self.now_ns)
            self._keep(found, refusal)
        elif what in ("shelve", "unshelve", "remove", "return"):
            wish = Wish(FlagEvent(what.upper()), QUICK.id, "x", "y", 60 * S)
            self.alarms, found, refusal = alarms.ask(self.program, self.alarms, wish, self.now_ns)
            self._keep(found, refusal)

    def _look(self) -> None:
        while True:
            conditions = Conditions(tuple(self.channels))
            self.alarms, found = alarms.advance(self.program, self.alarms, conditions, {QUICK.id}, self.now_ns)
            self.changes += found
            if not found:
                return

    def _keep(self, found: list[alarms.Change], refusal: str) -> None:
        assert bool(refusal) is not bool(found), "each request gives one record or one refusal"
        self.changes += found

    @property
    def state(self) -> alarms.Running:
        return self.alarms.states[QUICK.id]


def history(kind: tuple[bool, bool], steps: list[tuple[str, int]]) -> History:
    found = History(kind)
    for what, after_s in steps:
        found.step(what, after_s)
    return found


@settings(max_examples=150, deadline=None)
@given(st.sampled_from(list(PROGRAMS)), STEPS)
def test_invariants(kind: tuple[bool, bool], steps: list[tuple[str, int]]) -> None:
    found = history(kind, steps)
    latching, needs = kind
    acknowledged = gone = True
    for change in found.changes:
        before, after = change.before, change.after
        if before.flag is not None and after.flag is not None:
            assert change.announce is Announce.NOTHING
        if change.event is AlarmEvent.COND_ON and after.flag is None and before.state is not AlarmState.ACKNOWLEDGED:
            assert change.announce is Announce.NEW
            assert after.state is AlarmState.UNACKNOWLEDGED
        if change.announce is Announce.NEW:
            acknowledged = False
        if change.event is AlarmEvent.COND_ON:
            gone = False
        if change.event is AlarmEvent.COND_OFF:
            gone = True
        if change.event is AlarmEvent.ACK:
            assert before.flag is None
            acknowledged = True
        if before.state is not AlarmState.NORMAL and after.state is AlarmState.NORMAL:
            assert gone
            if latching:
                assert change.event is AlarmEvent.RESET
            elif needs and before.flag is None:
                assert acknowledged
        assert after.flag is not None or after.shelved is None
        if after.shelved is not None:
            assert after.shelved.until_ns - after.shelved.since_ns <= 100 * S
    state = found.state
    assert (state.shelved is None) or state.shelved.until_ns > found.now_ns


@settings(max_examples=100, deadline=None)
@given(st.sampled_from(list(PROGRAMS)), STEPS)
def test_hiding_always_ends_and_then_what_stands_is_told(kind: tuple[bool, bool], steps: list[tuple[str, int]]) -> None:
    found = history(kind, steps)
    found.step("return", 0)
    found.step("wait", 101)
    assert found.state.flag is None
    if found.channels[found.watch.index] is Channel.ACTIVE:
        assert found.state.state is AlarmState.UNACKNOWLEDGED or found.state.again_ns < 1 << 62
        last = [change for change in found.changes if change.announce is not Announce.NOTHING]
        assert last


@settings(max_examples=25, deadline=None)
@given(
    st.lists(
        st.tuples(
            st.sampled_from([Verb.ACKNOWLEDGE, Verb.SHELVE, Verb.UNSHELVE, Verb.REMOVE, Verb.RETURN]),
            st.sampled_from([QUICK.id, "FLASK-FULL", "*"]),
        ),
        max_size=8,
    )
)
def test_no_alarm_action_changes_an_interlock_or_an_order(actions: list[tuple[Verb, str]]) -> None:
    def run(asked: list[tuple[Verb, str]]) -> tuple[object, ...]:
        rehearsal = ready()
        waiting = list(asked)
        trace = []
        for value in (7.0, 7.0, 9.0, 9.0, 1.0, 1.0, 1.0, 1.0):
            rehearsal.sensors["PT-1"] = value
            rehearsal.run(0.5)
            rehearsal.now_ns += 1_000_000
            if waiting:
                rehearsal.now_ns -= 1_000_000
                verb, target = waiting.pop()
                rehearsal.ask(verb, target, reason="y", duration_s=60.0)
            trace.append(rehearsal.snapshot()["interlocks"])
        orders = [(order.unit, order.action, order.value, order.source) for order in rehearsal.orders]
        return tuple(trace), orders

    assert run(actions) == run([])


def shelved(seconds: float) -> tuple[History, str]:
    """A quiet alarm whose longest shelving is 100 s, asked to be shelved."""
    found = History((False, True))
    found.now_ns = 7 * S
    wish = Wish(FlagEvent.SHELVE, QUICK.id, "x", "y")
    wish = replace(wish, duration_ns=round(seconds * S)) if seconds else wish
    found.alarms, changes, refusal = alarms.ask(found.program, found.alarms, wish, found.now_ns)
    found.changes += changes
    return found, refusal


@pytest.mark.parametrize(("seconds", "granted"), [(0.0, False), (1e-9, True), (100.0, True), (100.000000001, False)])
def test_how_long_an_alarm_may_be_shelved(seconds: float, granted: bool) -> None:
    assert (shelved(seconds)[1] == "") is granted


def test_shelving_counts_from_its_first_moment_and_ends_in_the_scan_that_is_due() -> None:
    found, _ = shelved(60.0)
    found.step("wait", 50)
    wish = Wish(FlagEvent.SHELVE, QUICK.id, "x", "y", 50 * S)
    found.alarms, _, refusal = alarms.ask(found.program, found.alarms, wish, found.now_ns)
    assert refusal == ""
    assert found.state.until_ns == 107 * S
    assert found.alarms.due_ns == 107 * S
    found.step("wait", 49)
    assert found.state.flag is not None
    found.step("wait", 1)
    assert found.state.flag is None


def test_since_when_an_alarm_stands_and_when_it_is_repeated() -> None:
    found = history((True, True), [("on", 3), ("wait", 4)])
    assert (found.state.since_ns, found.state.again_ns) == (3 * S, 53 * S)
    found.step("ack", 1)
    assert (found.state.since_ns, found.state.again_ns) == (3 * S, 58 * S)
    found.step("wait", 49)
    assert found.changes[-1].event is AlarmEvent.ACK
    found.step("wait", 1)
    assert found.changes[-1].event is AlarmEvent.REALARM
    assert found.state.since_ns == 3 * S
    assert alarms.Running().since_ns == 0


@pytest.mark.parametrize(
    ("target", "words"),
    [("*", "there is nothing to acknowledge"), (QUICK.id, f"{QUICK.id} has nothing to acknowledge")],
)
def test_nothing_to_acknowledge(target: str, words: str) -> None:
    found = History((False, True))
    assert alarms.request(found.program, found.alarms, AlarmEvent.ACK, target, "x", 0)[2] == words


def test_a_state_before_and_after_is_one_of_the_table() -> None:
    """Each change of the engine is a row of the core or of the resync table."""
    found = history((True, True), [("on", 1), ("shelve", 1), ("off", 1), ("wait", 61), ("ack", 1), ("reset", 1)])
    words = [(str(c.event), str(c.before.state), str(c.after.state), str(c.announce)) for c in found.changes]
    assert words == [
        ("COND_ON", "A", "B", "new"),
        ("SHELVE", "B", "B", "-"),
        ("COND_OFF", "B", "E", "-"),
        ("SHELVE_EXPIRE", "E", "E", "new"),
        ("ACK", "E", "F", "off"),
        ("RESET", "F", "A", "-"),
    ]
    assert alarm_core.TABLE[AlarmState.LATCHED_ACKNOWLEDGED, AlarmEvent.RESET].to is AlarmState.NORMAL
    assert alarm_overlay.RESYNC[AlarmState.LATCHED_UNACKNOWLEDGED][1] is Announce.NEW
