"""Trips, first-out, latch, reset and their record, through the whole core on a plant without physics."""

from __future__ import annotations

import itertools
import json

import pytest
from fakes.rehearsal import Rehearsal, StandIn, sequence_demand
from fakes.rigs import BED_HOT, MS, PRESSURE_HIGH, S, program_of, two_pump_rig

from rigd.logic import scan
from rigd.logic.demand import BathDemand, PumpDemand
from rigd.model.devices import DeviceIdentity, LinkState, PumpState
from rigd.model.events import Event, EventKind
from rigd.model.intake import NOTHING
from rigd.model.orders import Authority, Stop, Verb
from rigd.model.protection import Condition, ConditionKind, Interlock
from rigd.ports.door import SNAPSHOT_KEYS

DELIVER = sequence_demand(
    pumps={"PU-A": PumpDemand(1.0), "PU-B": PumpDemand(1.0)},
    valves={"V-C": "waste"},
    baths={"CH": BathDemand(60.0)},
)


def running(want=DELIVER, **options) -> Rehearsal:
    """A rig that has been reset and delivers from syringes of unknown content."""
    rehearsal = Rehearsal(program_of(**options), StandIn(want))
    for name in ("PU-A", "PU-B"):
        rehearsal.pump(name).level_mL = 4.0
    rehearsal.ready()
    rehearsal.run(5.0)
    assert rehearsal.pump("PU-A").state is PumpState.DELIVERING
    return rehearsal


def trips(rehearsal: Rehearsal) -> list[Event]:
    return rehearsal.happened(EventKind.TRIP)


def test_start_up_is_a_trip_and_orders_the_end_state_of_a_cut() -> None:
    rehearsal = Rehearsal(program_of(), StandIn(DELIVER))
    rehearsal.run(2.0)
    assert rehearsal.told("PU-A") == [("stop", 0.0)]
    assert rehearsal.told("V-A") == [("move", 0.0)]
    assert rehearsal.told("CH") == [("set temperature", 20.0), ("circulate", 1.0)]
    assert {order.authority for order in rehearsal.orders} == {Authority.CUT}
    assert not rehearsal.conduct.views[-1].verdict.permit
    assert trips(rehearsal) == []


def test_reset_gives_permission_and_moves_nothing() -> None:
    rehearsal = Rehearsal(program_of())
    rehearsal.ready()
    before = len(rehearsal.orders)
    rehearsal.run(3.0)
    assert rehearsal.conduct.views[-1].verdict.permit
    assert len(rehearsal.orders) == before


def test_reset_before_everything_was_heard_of_is_refused_by_name() -> None:
    rehearsal = Rehearsal(program_of())
    rehearsal.silent.add("TT-1")
    rehearsal.run(1.0)
    answer = rehearsal.ask(Verb.RESET, "*")
    assert answer.fields["result"] == "refused"
    assert "BED-HOT" in answer.text
    assert "TT-1 has not been heard of yet" in answer.text


def test_a_device_that_never_answers_is_named_after_the_time_of_grace() -> None:
    rehearsal = Rehearsal(program_of())
    rehearsal.silent.update(tag for tag in rehearsal.program.tags if tag.startswith("PU-A"))
    rehearsal.forget_link("pump-A")
    rehearsal.run(5.0)
    assert "pump-A has not been heard of yet" in rehearsal.ask(Verb.RESET, "*").text
    assert trips(rehearsal) == []
    rehearsal.run(6.0)
    assert rehearsal.snapshot()["interlocks"]["LINK-pump-A"] == "tripped active"
    assert "LINK-pump-A (LINK-pump-A): its cause is still present" in rehearsal.ask(Verb.RESET, "*").text
    assert trips(rehearsal) == []  # what the start-up finds is no first-out


def test_overpressure_stops_every_pump_and_says_what_happened() -> None:
    rehearsal = running()
    rehearsal.sensors["PT-1"] = 8.42
    tripped_ns = rehearsal.now_ns
    rehearsal.run(1.0, until=lambda: bool(trips(rehearsal)))
    (trip,) = trips(rehearsal)
    assert trip.subject == "PRESSURE-HIGH"
    assert trip.t_ns - tripped_ns <= 400 * MS  # one poll period and the delay
    assert trip.text == (
        "Pressure in the wetted path high-high: PT-1 read 8.42 bar, above its limit of 8 bar, so every pump was "
        "ordered to stop, the valves to rest and the baths to their safe temperature (PRESSURE-HIGH, first-out). "
        "Find the block."
    )
    expected = {"first_out": "PRESSURE-HIGH", "tag": "PT-1", "value": 8.42, "limit": 8.0, "unit": "bar", "stop": "cut"}
    assert expected.items() <= trip.fields.items()
    samples = str(trip.fields["samples"]).split()
    assert len(samples) == 20
    assert samples[-1].endswith("/8.42")
    rehearsal.run(2.0)
    assert rehearsal.told("PU-A")[-1] == ("stop", 0.0)
    assert rehearsal.told("CH")[-1] == ("set temperature", 20.0)
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    end = rehearsal.end()
    assert end is not None
    assert (end.outcome, end.exit_code) == ("tripped", 1)
    assert "PRESSURE-HIGH" in end.text


def test_a_spike_between_two_scans_is_seen_when_there_is_no_delay() -> None:
    quick = Interlock("QUICK", "quick", (Condition(ConditionKind.HIGH, "PT-1", 8.0),), Stop.CUT)
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=(quick,))))
    rehearsal.ready()
    rehearsal.now_ns += 50 * MS
    intake_samples = rehearsal.spike("PT-1", 9.0, 1.0)
    assert [sample.value for sample in intake_samples] == [9.0, 1.0]
    assert [trip.subject for trip in trips(rehearsal)] == ["QUICK"]


def test_latch_reset_with_cause_present_is_refused_and_named() -> None:
    rehearsal = running()
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(2.0)
    answer = rehearsal.ask(Verb.RESET, "*")
    assert answer.fields["result"] == "refused"
    assert "PRESSURE-HIGH (Pressure in the wetted path high-high): its cause is still present" in answer.text
    rehearsal.sensors["PT-1"] = 1.0
    rehearsal.run(0.5)
    assert "not for long enough" in rehearsal.ask(Verb.RESET, "*").text
    rehearsal.run(2.0)
    assert rehearsal.conduct.views[-1].verdict.stop is Stop.CUT
    assert rehearsal.ask(Verb.RESET, "*", who="").fields["result"] == "refused"
    rehearsal.conduct.want = None
    assert rehearsal.ask(Verb.RESET, "PRESSURE-HIGH").fields["result"] == "accepted"
    assert rehearsal.conduct.views[-1].verdict.permit
    assert rehearsal.told("PU-A")[-1] == ("stop", 0.0)


THREE = (
    Interlock("P-ONE", "one", (Condition(ConditionKind.HIGH, "PT-1", 8.0),), Stop.CUT, on_delay_ns=200 * MS),
    Interlock("P-TWO", "two", (Condition(ConditionKind.HIGH, "PT-2", 8.0),), Stop.CUT, on_delay_ns=200 * MS),
    Interlock("T-ONE", "three", (Condition(ConditionKind.HIGH, "TT-1", 75.0),), Stop.QUENCH, on_delay_ns=200 * MS),
)
TAG_OF = {"P-ONE": "PT-1", "P-TWO": "PT-2", "T-ONE": "TT-1"}


@pytest.mark.parametrize("order", list(itertools.permutations(TAG_OF)), ids=lambda order: "-".join(order))
@pytest.mark.parametrize("together", [False, True], ids=["own scans", "one scan"])
def test_three_causes_50_ms_apart_name_the_right_first_out(order: tuple[str, ...], together: bool) -> None:
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=THREE)))
    rehearsal.ready()
    rehearsal.silent.update(TAG_OF.values())
    start_ns = rehearsal.now_ns + 10 * MS
    if together:  # acquired 50 ms apart, but heard of in one scan
        rehearsal.now_ns = start_ns + 200 * MS
        rehearsal.give(*((TAG_OF[name], 99.0, start_ns + i * 50 * MS) for i, name in enumerate(order)))
    for i, name in enumerate(order if not together else ()):
        rehearsal.now_ns = start_ns + i * 50 * MS
        rehearsal.give((TAG_OF[name], 99.0, rehearsal.now_ns))
    rehearsal.run(0.5)
    found = trips(rehearsal)
    assert [trip.subject for trip in found] == list(order)
    assert [trip.fields["number"] for trip in found] == [1, 2, 3]
    assert {trip.fields["first_out"] for trip in found} == {order[0]}
    assert rehearsal.conduct.views[-1].verdict.first_out == order[0]


@pytest.mark.parametrize("first", ["PT-1", "PT-2"])
def test_first_out_names_the_cause_within_an_interlock_and_numbers_the_next(first: str) -> None:
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=(PRESSURE_HIGH,))))
    rehearsal.ready()
    rehearsal.silent.update(("PT-1", "PT-2"))
    second = "PT-2" if first == "PT-1" else "PT-1"
    rehearsal.give((first, 9.0, rehearsal.now_ns))
    rehearsal.run(0.3)
    rehearsal.give((second, 9.5, rehearsal.now_ns))
    rehearsal.run(0.1)
    (trip,) = trips(rehearsal)
    assert trip.fields["tag"] == first
    more = [event for event in rehearsal.happened(EventKind.INTERLOCK) if event.fields["number"] == 2]
    assert len(more) == 1
    assert second in more[0].text


@pytest.mark.parametrize(
    ("pressure", "temperature", "level"),
    [(9.0, 80.0, Stop.CUT), (1.0, 80.0, Stop.QUENCH), (9.0, 20.0, Stop.CUT)],
)
def test_cut_beats_quench(pressure: float, temperature: float, level: Stop) -> None:
    rehearsal = Rehearsal(program_of(), StandIn(STILL))  # nothing was delivered, so a quench needs no flush
    rehearsal.ready()
    rehearsal.sensors.update({"PT-1": pressure, "TT-1": temperature})
    rehearsal.run(3.5)
    verdict = rehearsal.conduct.views[-1].verdict
    assert (verdict.stop, verdict.permit, verdict.stop_done) == (level, False, True)


STILL = sequence_demand(pumps={"PU-A": PumpDemand(0.0), "PU-B": PumpDemand(0.0)})


def test_a_stop_never_comes_down_without_a_reset() -> None:
    rehearsal = running()
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(2.0)
    rehearsal.sensors.update({"PT-1": 1.0, "TT-1": 80.0})
    rehearsal.run(10.0)
    assert rehearsal.conduct.views[-1].verdict.stop is Stop.CUT
    assert rehearsal.ask(Verb.RESET, "PRESSURE-HIGH").fields["result"] == "accepted"
    assert rehearsal.conduct.views[-1].verdict.stop is Stop.CUT
    assert not rehearsal.conduct.views[-1].verdict.permit


def test_a_sensor_that_goes_silent_trips_by_its_age() -> None:
    rehearsal = running()
    rehearsal.silent.add("PT-2")
    silent_ns = rehearsal.now_ns
    rehearsal.run(3.0, until=lambda: bool(trips(rehearsal)))
    (trip,) = trips(rehearsal)
    assert "PT-2 cannot be believed (stale" in trip.text
    assert trip.t_ns - silent_ns <= 1_200 * MS  # stale after 1 s, then 200 ms of delay


def test_a_lost_link_cuts_and_names_the_device() -> None:
    rehearsal = running()
    rehearsal.link("pump-A", LinkState.FAILED, detail="no reply")
    rehearsal.run(0.3)
    assert trips(rehearsal)[0].subject == "LINK-pump-A"
    assert {trip.fields["first_out"] for trip in trips(rehearsal)} == {"LINK-pump-A"}
    assert "pump-A does not answer (no reply)" in trips(rehearsal)[0].text


def test_a_power_cycled_device_trips_and_is_told_again_what_it_must_know() -> None:
    rehearsal = running()
    rehearsal.link("valve-A", LinkState.ONLINE, power_cycled=True)
    rehearsal.run(0.3)
    assert [trip.subject for trip in trips(rehearsal)] == ["POWER-valve-A"]
    assert rehearsal.told("V-A") == [("move", 0.0)] * 2  # at the start-up, and anew after the restart


def test_another_device_in_its_place_trips_until_the_right_one_is_back() -> None:
    rehearsal = running()
    status = {"power_cycled": False}
    rehearsal.link("pump-B", LinkState.ONLINE, **status)
    rehearsal.run(0.2)
    assert trips(rehearsal) == []
    rehearsal.link_as("pump-B", DeviceIdentity("bench", "plain", "2", simulated=True))
    rehearsal.run(3.0)
    assert [trip.subject for trip in trips(rehearsal)] == ["POWER-pump-B"]
    assert "still present" in rehearsal.ask(Verb.RESET, "*").text
    rehearsal.link("pump-B", LinkState.ONLINE)
    rehearsal.run(3.0)
    rehearsal.conduct.want = None
    assert rehearsal.ask(Verb.RESET, "*").fields["result"] == "accepted"


def test_a_valve_that_is_not_where_it_was_told_trips_after_its_travel_time() -> None:
    rehearsal = running()
    rehearsal.deaf.add("V-C")
    rehearsal.conduct.want = sequence_demand(valves={"V-C": "collect"})
    told_ns = rehearsal.now_ns
    rehearsal.run(5.0, until=lambda: bool(trips(rehearsal)))
    (trip,) = trips(rehearsal)
    assert trip.subject == "MISMATCH-V-C"
    assert "V-C.position read waste, which is not what it was told" in trip.text
    assert S <= trip.t_ns - told_ns <= 4 * S


def test_a_stalled_pump_cuts() -> None:
    rehearsal = running()
    rehearsal.pump("PU-A").state = PumpState.STALLED
    rehearsal.run(1.5)
    assert [trip.subject for trip in trips(rehearsal)] == ["STALL-PU-A"]


def test_an_error_in_conduct_cuts_and_conduct_is_not_entered_again() -> None:
    rehearsal = running()
    rehearsal.conduct.fail = True
    entered = len(rehearsal.conduct.views)
    rehearsal.run(3.0)
    assert len(rehearsal.conduct.views) == entered + 1
    assert [trip.subject for trip in trips(rehearsal)] == ["FAULT-CONDUCT"]
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    end = rehearsal.end()
    assert end is not None
    assert end.outcome == "tripped"
    assert "still present" in rehearsal.ask(Verb.RESET, "*").text


@pytest.mark.parametrize(
    ("name", "interlock", "level"),
    [
        ("scan", "FAULT-SCAN", Stop.CUT),
        ("suspend", "FAULT-SUSPEND", Stop.CUT),
        ("guard", "FAULT-GUARD", Stop.CUT),
    ],
)
def test_a_fault_of_the_daemon_stops_the_rig(name: str, interlock: str, level: Stop) -> None:
    rehearsal = running()
    rehearsal.fault(name, "invented")
    rehearsal.run(0.2)
    assert [trip.subject for trip in trips(rehearsal)] == [interlock]
    assert "invented" in trips(rehearsal)[0].text
    assert rehearsal.conduct.views[-1].verdict.stop is level


def test_a_journal_fault_must_last_five_seconds() -> None:
    rehearsal = running()
    rehearsal.fault("journal", "disk full")
    rehearsal.run(8.0)
    assert trips(rehearsal) == []
    for _ in range(60):
        rehearsal.fault("journal", "disk full")
        rehearsal.run(0.1)
    assert [trip.subject for trip in trips(rehearsal)] == ["FAULT-JOURNAL"]


def test_a_request_to_stop_ends_the_run_as_stopped() -> None:
    rehearsal = running()
    assert rehearsal.ask(Verb.CUT).fields["result"] == "accepted"
    rehearsal.run(3.0)
    assert [trip.subject for trip in trips(rehearsal)] == ["CUT-REQUEST"]
    assert "asked for by someone" in trips(rehearsal)[0].text
    end = rehearsal.end()
    assert end is not None
    assert (end.outcome, end.exit_code) == ("stopped", 1)


def test_a_request_to_stop_before_the_first_reset_ends_the_run_too() -> None:
    rehearsal = Rehearsal(program_of())
    rehearsal.run(2.0)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(2.0)
    end = rehearsal.end()
    assert end is not None
    assert end.outcome == "stopped"


def test_the_end_of_the_recipe_waits_for_the_pumps() -> None:
    rehearsal = running()
    rehearsal.conduct.end = "done"
    assert rehearsal.end() is None
    rehearsal.conduct.want = STILL
    rehearsal.run(2.0)
    end = rehearsal.end()
    assert end is not None
    assert (end.outcome, end.exit_code) == ("done", 0)


def test_a_pump_that_says_ok_and_goes_on_is_told_again_and_alarmed() -> None:
    rehearsal = running()
    rehearsal.deaf.add("PU-A")
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(8.0)
    stops = [value for value in rehearsal.told("PU-A") if value == ("stop", 0.0)]
    assert len(stops) >= 4
    raised = [event for event in rehearsal.happened(EventKind.ALARM) if event.subject == "STOP-UNCONFIRMED"]
    assert len(raised) == 1
    assert "by hand" in raised[0].text
    assert not rehearsal.conduct.views[-1].verdict.stop_done
    assert rehearsal.end() is None
    rehearsal.deaf.clear()
    rehearsal.run(4.0)
    assert rehearsal.conduct.views[-1].verdict.stop_done


def test_a_pump_that_cannot_be_told_to_stop_is_alarmed_and_the_run_does_not_end() -> None:
    rehearsal = running()
    rehearsal.failing.add("PU-A")
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(20.0)
    raised = [event for event in rehearsal.happened(EventKind.ALARM) if event.subject == "STOP-UNCONFIRMED"]
    assert len(raised) == 1
    assert rehearsal.end() is None
    assert len(rehearsal.told("PU-A")) > 8  # tried for ever
    rehearsal.failing.clear()
    rehearsal.run(4.0)
    assert rehearsal.end() is not None


def test_a_valve_that_refuses_its_order_trips_as_well() -> None:
    rehearsal = running()
    rehearsal.failing.add("V-C")
    rehearsal.conduct.want = sequence_demand(valves={"V-C": "collect"})
    rehearsal.run(8.0)
    assert [trip.subject for trip in trips(rehearsal)] == ["MISMATCH-V-C"]


def test_the_trip_tells_what_was_really_done() -> None:
    rehearsal = running()
    for name in ("PU-A", "PU-B"):  # content not known: a quench cannot flush
        rehearsal.pump(name).standby_mL = 3.0
    rehearsal.sensors["TT-1"] = 80.0
    rehearsal.run(4.0)
    (trip,) = trips(rehearsal)
    assert trip.fields["stop"] == "quench"
    assert "so a flush was not possible and every pump was ordered to stop" in trip.text


def test_a_hold_interlock_asks_for_a_hold_and_leaves_the_permit() -> None:
    warm = Interlock("WARM", "bed warm", (Condition(ConditionKind.HIGH, "TT-1", 65.0),), Stop.HOLD)
    rehearsal = Rehearsal(program_of(two_pump_rig(interlocks=(PRESSURE_HIGH, BED_HOT, warm))))
    rehearsal.ready()
    rehearsal.sensors["TT-1"] = 70.0
    rehearsal.run(1.5)
    verdict = rehearsal.conduct.views[-1].verdict
    assert (verdict.stop, verdict.permit, verdict.hold_wanted) == (Stop.HOLD, True, "WARM")


def test_snapshot_has_the_agreed_keys_and_is_json() -> None:
    rehearsal = running()
    rehearsal.sensors["PT-1"] = float("nan")
    rehearsal.run(0.5)
    shown = rehearsal.snapshot()
    assert set(shown) == set(SNAPSHOT_KEYS) - {"run", "utc", "record"}
    again = json.loads(json.dumps(shown, allow_nan=False))
    assert again["values"]["PT-1"] == {"v": None, "q": "bad", "c": "not a number", "u": "bar", "text": ""}
    assert again["values"]["V-C.position"]["text"] == "waste"
    assert again["interlocks"]["PRESSURE-HIGH"] == "tripped active"
    assert again["stop"] == "cut"


def test_every_request_is_answered_once_and_time_never_runs_back() -> None:
    rehearsal = running()
    for verb, target in [(Verb.ACKNOWLEDGE, "*"), (Verb.RESET, "NONSENSE"), (Verb.END_BYPASS, "PRESSURE-HIGH")]:
        assert rehearsal.ask(verb, target).fields["result"] == "refused"
    with pytest.raises(AssertionError, match="backwards"):
        scan.protect(rehearsal.program, rehearsal.state, NOTHING, rehearsal.now_ns - 1)
