"""Alarms and bypasses through the whole core."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.rehearsal import Rehearsal, StandIn
from fakes.rigs import BED_HOT, FLASK_FULL, MS, PRESSURE_HIGH, PRESSURE_RISING, S, program_of, two_pump_rig

from rigd.logic.protect import signals
from rigd.logic.protect.bypass import LONGEST_S, partners
from rigd.model.devices import PumpState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Stop, Verb
from rigd.model.protection import Condition, ConditionKind, Interlock, OnBad


def ready(**rig) -> Rehearsal:
    rehearsal = Rehearsal(program_of(two_pump_rig(**rig)), StandIn())
    rehearsal.ready()
    return rehearsal


def alarms(rehearsal: Rehearsal, name: str = "PRESSURE-RISING") -> list[str]:
    return [str(event.fields["state"]) for event in rehearsal.happened(EventKind.ALARM) if event.subject == name]


def standing(rehearsal: Rehearsal) -> list[str]:
    return [alarm["id"] for alarm in rehearsal.snapshot()["alarms"]]


def test_an_alarm_comes_after_its_delay_and_goes_after_deadband_and_delay() -> None:
    rehearsal = ready()
    rehearsal.sensors["PT-1"] = 6.8
    rehearsal.run(0.8)
    assert alarms(rehearsal) == []
    rehearsal.run(0.6)
    assert alarms(rehearsal) == ["unacknowledged"]
    event = rehearsal.happened(EventKind.ALARM)[0]
    assert event.text == (
        "Column pressure near its limit (PRESSURE-RISING): unacknowledged, PT-1 read 6.8 bar, above its limit of "
        "6.5 bar. Lower the flow."
    )
    assert (event.fields["priority"], event.fields["value"], event.fields["limit"]) == (2, 6.8, 6.5)
    assert standing(rehearsal) == ["PRESSURE-RISING"]
    rehearsal.sensors["PT-1"] = 6.2  # within the deadband
    rehearsal.run(20.0)
    assert alarms(rehearsal) == ["unacknowledged"]
    rehearsal.sensors["PT-1"] = 6.0
    rehearsal.run(14.0)
    assert alarms(rehearsal) == ["unacknowledged"]
    rehearsal.run(2.0)
    assert alarms(rehearsal)[-1] == "returned, unacknowledged"
    assert rehearsal.ask(Verb.ACKNOWLEDGE, "PRESSURE-RISING").fields["result"] == "accepted"
    assert alarms(rehearsal)[-1] == "normal"
    assert standing(rehearsal) == []


def test_acknowledge_one_all_none_and_unknown() -> None:
    rehearsal = ready()
    rehearsal.sensors["PT-1"] = 7.0
    rehearsal.run(2.0)
    assert "no alarm" in rehearsal.ask(Verb.ACKNOWLEDGE, "NONSENSE").text
    assert rehearsal.ask(Verb.ACKNOWLEDGE, "*").fields["result"] == "accepted"
    assert alarms(rehearsal)[-1] == "acknowledged"
    assert "by someone" in rehearsal.happened(EventKind.ALARM)[-1].text
    assert "nothing to acknowledge" in rehearsal.ask(Verb.ACKNOWLEDGE, "*").text


def test_a_latching_alarm_stands_until_it_is_acknowledged_and_reset() -> None:
    rehearsal = ready(alarms=(replace(PRESSURE_RISING, latching=True, off_delay_ns=0),))
    rehearsal.sensors["PT-1"] = 7.0
    rehearsal.run(2.0)
    rehearsal.sensors["PT-1"] = 1.0
    rehearsal.run(1.0)
    assert alarms(rehearsal)[-1] == "latched, unacknowledged"
    assert rehearsal.ask(Verb.RESET, "PRESSURE-RISING").fields["result"] == "refused"
    rehearsal.ask(Verb.ACKNOWLEDGE, "PRESSURE-RISING")
    assert standing(rehearsal) == ["PRESSURE-RISING"]
    assert rehearsal.ask(Verb.RESET, "*").fields["result"] == "accepted"
    assert standing(rehearsal) == []


def test_a_bad_tag_leaves_an_alarm_as_it_is() -> None:
    rehearsal = ready(interlocks=(BED_HOT,))
    rehearsal.sensors["PT-1"] = 7.0
    rehearsal.run(0.5)
    rehearsal.silent.add("PT-1")
    rehearsal.run(5.0)
    assert alarms(rehearsal) == ["unacknowledged"]
    assert rehearsal.state.protect.alarms.due_ns > rehearsal.now_ns


def test_an_alarm_on_a_counted_volume_needs_no_sensor_and_the_count_does_not_grow_old() -> None:
    rehearsal = ready(alarms=(FLASK_FULL,))
    assert alarms(rehearsal, "FLASK-FULL") == []
    anything = replace(FLASK_FULL, condition=Condition(ConditionKind.HIGH, "flask.volume", -1.0))
    assert alarms(ready(alarms=(anything,)), "FLASK-FULL") == ["unacknowledged"]
    samples = rehearsal.state.protect.signals.samples
    assert samples["flask.volume"].value == 0.0
    state, aged = signals.grow_old(rehearsal.program, rehearsal.state.protect.signals, 10_000 * S)
    assert "flask.volume" not in aged
    assert state.samples["flask.volume"] is samples["flask.volume"]


def test_an_empty_pump_asks_for_a_hold_as_long_as_it_is_empty() -> None:
    rehearsal = ready()
    rehearsal.pump("PU-A").state = PumpState.EMPTY
    rehearsal.run(1.5)
    verdict = rehearsal.conduct.views[-1].verdict
    assert (verdict.hold_wanted, verdict.permit, verdict.stop) == ("EMPTY-PU-A", True, Stop.NONE)
    rehearsal.ask(Verb.ACKNOWLEDGE, "EMPTY-PU-A")
    assert rehearsal.conduct.views[-1].verdict.hold_wanted == "EMPTY-PU-A"
    rehearsal.pump("PU-A").state = PumpState.STOPPED
    rehearsal.run(1.5)
    assert rehearsal.conduct.views[-1].verdict.hold_wanted == ""


JACKET = Interlock("JACKET-HOT", "Jacket hot", (Condition(ConditionKind.HIGH, "TT-2", 85.0),), Stop.QUENCH)
RULES = (PRESSURE_HIGH, BED_HOT, JACKET)


def bypass(rehearsal: Rehearsal, target: str = "BED-HOT", duration_s: float = 60.0, **more) -> Event:
    args = {"reason": "sensor exchange", "duration_s": duration_s, **more}
    who = args.pop("who", "someone")
    return rehearsal.ask(Verb.BYPASS, target, who, **args)


def latch(rehearsal: Rehearsal, name: str = "BED-HOT") -> str:
    return rehearsal.snapshot()["interlocks"][name]


def test_a_bypass_lets_run_tells_of_a_demand_and_ends_into_a_trip() -> None:
    rehearsal = ready(interlocks=RULES)
    assert bypass(rehearsal).fields["result"] == "accepted"
    granted_ns = rehearsal.now_ns
    assert latch(rehearsal) == "bypassed"
    rehearsal.sensors["TT-1"] = 80.0
    rehearsal.run(30.0)
    assert rehearsal.happened(EventKind.TRIP) == []
    assert rehearsal.conduct.views[-1].verdict.permit
    assert "BYPASS-DEMAND" in standing(rehearsal)
    rehearsal.run(60.0)
    (trip,) = rehearsal.happened(EventKind.TRIP)
    assert trip.subject == "BED-HOT"
    assert trip.t_ns - granted_ns == 60 * S
    rehearsal.sensors["TT-1"] = 20.0
    rehearsal.run(3.0)
    assert latch(rehearsal) == "tripped clear"


def test_a_bypass_ends_by_itself_or_when_asked() -> None:
    rehearsal = ready(interlocks=RULES)
    bypass(rehearsal, duration_s=10.0)
    rehearsal.run(9.0)
    assert latch(rehearsal) == "bypassed"
    rehearsal.run(1.5)
    assert latch(rehearsal) == "healthy"
    bypass(rehearsal)
    assert rehearsal.ask(Verb.END_BYPASS, "BED-HOT").fields["result"] == "accepted"
    assert latch(rehearsal) == "healthy"
    assert "bypass ended by someone" in rehearsal.happened(EventKind.INTERLOCK)[-1].text


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({"who": " "}, "name"),
        ({"reason": " "}, "reason"),
        ({"duration_s": 0.0}, "duration"),
        ({"duration_s": -5.0}, "duration"),
        ({"duration_s": float("nan")}, "duration"),
        ({"duration_s": "soon"}, "duration"),
        ({"duration_s": LONGEST_S + 1}, "duration"),
        ({"target": "LINK-pump-A"}, "built in"),
        ({"target": "CUT-REQUEST"}, "built in"),
        ({"target": "NONSENSE"}, "no interlock"),
    ],
)
def test_a_bypass_that_is_refused_says_why(more: dict, words: str) -> None:
    rehearsal = ready(interlocks=RULES)
    answer = bypass(rehearsal, **more)
    assert answer.fields["result"] == "refused"
    assert words in answer.text
    assert "bypassed" not in rehearsal.snapshot()["interlocks"].values()


def test_never_both_partners_and_never_a_second_time() -> None:
    rehearsal = ready(interlocks=RULES)
    assert [lock.id for lock in partners(rehearsal.program, BED_HOT)] == ["JACKET-HOT"]
    bypass(rehearsal)
    assert "its partner BED-HOT is not healthy" in bypass(rehearsal, "JACKET-HOT").text
    assert "bypassed already" in bypass(rehearsal).text
    assert bypass(rehearsal, "PRESSURE-HIGH").fields["result"] == "accepted"


def test_no_bypass_out_of_a_trip_with_a_cause_or_unattended() -> None:
    rehearsal = ready(interlocks=(PRESSURE_HIGH, replace(BED_HOT, on_delay_ns=60 * S)))
    rehearsal.sensors["TT-1"] = 80.0
    rehearsal.run(2.0)
    assert "its cause is present" in bypass(rehearsal).text
    rehearsal.run(60.0)
    assert "while the interlock is tripped" in bypass(rehearsal).text
    alone = Rehearsal(program_of(two_pump_rig(interlocks=RULES), unattended=True))
    alone.ready()
    assert "unattended" in bypass(alone).text


def test_a_restart_drops_every_bypass() -> None:
    rehearsal = ready(interlocks=RULES)
    bypass(rehearsal)
    again = Rehearsal(rehearsal.program)
    assert set(again.snapshot()["interlocks"].values()) == {"tripped clear"}


def test_a_voting_degraded_by_a_bad_channel_is_told_and_ends_in_a_trip() -> None:
    lenient = replace(PRESSURE_HIGH, on_bad=OnBad.IGNORE)
    rehearsal = ready(interlocks=(lenient,))
    rehearsal.silent.add("PT-2")
    rehearsal.run(3.0)
    notes = [event.text for event in rehearsal.happened(EventKind.INTERLOCK) if event.subject == "PRESSURE-HIGH"]
    assert "1oo2 degraded to 1oo1" in notes[-1]
    assert rehearsal.happened(EventKind.TRIP) == []
    rehearsal.run(1795.0)
    assert rehearsal.happened(EventKind.TRIP) == []
    rehearsal.run(10.0)
    assert [trip.subject for trip in rehearsal.happened(EventKind.TRIP)] == ["PRESSURE-HIGH"]


def test_a_degraded_voting_trips_at_once_when_nobody_is_there() -> None:
    lenient = replace(PRESSURE_HIGH, on_bad=OnBad.IGNORE)
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=(lenient,)), unattended=True))
    rehearsal.ready()
    rehearsal.silent.add("PT-2")
    rehearsal.run(1.5)
    assert [trip.subject for trip in rehearsal.happened(EventKind.TRIP)] == ["PRESSURE-HIGH"]


def test_no_healthy_channel_trips_under_either_policy() -> None:
    lenient = replace(PRESSURE_HIGH, on_bad=OnBad.IGNORE)
    rehearsal = ready(interlocks=(lenient,))
    rehearsal.silent.update(("PT-1", "PT-2"))
    silent_ns = rehearsal.now_ns
    rehearsal.run(3.0)
    (trip,) = rehearsal.happened(EventKind.TRIP)
    assert trip.subject == "PRESSURE-HIGH"
    assert trip.t_ns - silent_ns <= 1_200 * MS  # stale after 1 s, then 200 ms of delay
