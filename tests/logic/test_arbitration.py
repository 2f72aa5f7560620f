"""Demands into orders: only differences, in the right order, repeated when they failed, never when they must not."""

from __future__ import annotations

from dataclasses import replace

import pytest
from fakes.arbitration_desk import Desk
from fakes.rigs import MS, S, program_of, two_pump_rig

from rigd.logic import arbitration
from rigd.logic.arbitration import NEVER_NS, TRIES, Aspect, Memory
from rigd.logic.demand import BathDemand, Demand, OneShot, PumpDemand
from rigd.model.devices import DeviceStatus, LinkState, PumpState
from rigd.model.orders import Action, Authority, Result

EVERYTHING = {
    "pumps": {"PU-A": PumpDemand(1.0), "PU-B": PumpDemand(0.0)},
    "valves": {"V-A": "reagent"},
    "baths": {"CH": BathDemand(60.0)},
}


def test_stops_leave_first_and_deliveries_last_and_numbers_rise() -> None:
    desk = Desk()
    assert desk.want(**EVERYTHING) == [
        ("PU-B", "stop", 0.0),
        ("V-A", "move", 1.0),
        ("CH", "set temperature", 60.0),
        ("CH", "circulate", 1.0),
        ("PU-A", "deliver", 1.0),
    ]
    assert [order.number for order in desk.orders] == [1, 2, 3, 4, 5]
    assert {order.source for order in desk.orders} == {"test"}


def test_what_stands_is_not_ordered_again_answered_or_not() -> None:
    desk = Desk()
    desk.want(**EVERYTHING)
    assert desk.want(**EVERYTHING) == []
    desk.answer(Result.DONE)
    assert desk.want(**EVERYTHING) == []


def test_a_new_target_is_ordered_and_the_rest_is_left() -> None:
    desk = Desk()
    desk.want(**EVERYTHING)
    desk.answer(Result.DONE)
    assert desk.want(baths={"CH": BathDemand(61.0)}) == [("CH", "set temperature", 61.0)]
    assert desk.want(pumps={"PU-A": PumpDemand(1.5)}) == [("PU-A", "deliver", 1.5)]
    assert desk.want(pumps={"PU-A": PumpDemand()}) == [("PU-A", "stop", 0.0)]


def test_an_order_without_a_source_is_refused_by_an_assertion() -> None:
    desk = Desk()
    with pytest.raises(AssertionError, match="source"):
        arbitration.decide(desk.program, Memory(), Demand(Authority.CUT, "", {"PU-A": PumpDemand()}), {}, 0)


def test_a_valve_turned_by_hand_gets_no_order() -> None:
    rig = two_pump_rig()
    by_hand = tuple(replace(valve, device="") if valve.id == "V-C" else valve for valve in rig.valves)
    desk = Desk(program_of(replace(rig, valves=by_hand)))
    assert desk.want(valves={"V-C": "collect"}) == []


@pytest.mark.parametrize("result", [Result.FAILED, Result.REFUSED])
def test_a_failed_order_of_the_sequence_is_tried_three_times_with_an_event_each(result: Result) -> None:
    desk = Desk()
    given = 0
    for _ in range(200):
        given += len(desk.want(valves={"V-A": "reagent"}))
        desk.answer(result)
        desk.now_ns += 100 * MS
    assert given == TRIES
    assert [event.subject for event in desk.events] == ["V-A"] * TRIES
    assert desk.events[0].text == "V-A did not carry out 'move': invented."
    assert desk.memory.due_ns == NEVER_NS
    assert desk.want(valves={"V-A": "solvent"}) == [("V-A", "move", 0.0)]


def test_an_order_of_a_stop_is_tried_for_ever_but_told_of_three_times() -> None:
    desk = Desk()
    given = 0
    for _ in range(600):
        given += len(desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()}))
        desk.answer(Result.FAILED)
        desk.now_ns += 100 * MS
    assert given > 25  # at most 2 s apart
    assert len(desk.events) == TRIES


def test_a_retry_waits_and_is_due_when_told() -> None:
    desk = Desk()
    desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()})
    desk.answer(Result.FAILED)
    assert desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()}) == []
    desk.now_ns = desk.memory.due_ns
    assert desk.now_ns == 200 * MS
    assert desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()}) == [("PU-A", "stop", 0.0)]


def test_a_device_that_comes_back_is_tried_at_once() -> None:
    desk = Desk()
    for _ in range(4):
        desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()})
        desk.answer(Result.FAILED)
        desk.now_ns = desk.memory.due_ns
    desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()})
    desk.answer(Result.FAILED)
    desk.note(links=(DeviceStatus("pump-A", LinkState.ONLINE, desk.now_ns),))
    assert desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()}) == [("PU-A", "stop", 0.0)]


def test_a_device_that_restarted_has_been_told_nothing() -> None:
    desk = Desk()
    desk.want(**EVERYTHING)
    desk.answer(Result.DONE)
    desk.note(links=(DeviceStatus("chiller", LinkState.ONLINE, 0, power_cycled=True),))
    assert desk.want(**EVERYTHING) == [("CH", "set temperature", 60.0), ("CH", "circulate", 1.0)]


def test_a_superseded_order_is_ordered_again_if_it_is_still_wanted_and_makes_no_event() -> None:
    desk = Desk()
    desk.want(valves={"V-A": "reagent"})
    desk.answer(Result.SUPERSEDED)
    desk.now_ns = desk.memory.due_ns
    assert desk.want(valves={"V-A": "reagent"}) == [("V-A", "move", 1.0)]
    assert desk.events == []


def test_an_answer_to_an_old_order_does_not_touch_the_new_one() -> None:
    desk = Desk()
    desk.want(valves={"V-A": "reagent"})
    old = desk.orders[0]
    desk.want(valves={"V-A": "solvent"})
    desk.answer(Result.FAILED, old)
    assert desk.want(valves={"V-A": "solvent"}) == []
    assert len(desk.events) == 1


def fill(ticket: str, flow: float = 0.0) -> dict[str, PumpDemand]:
    return {"PU-A": PumpDemand(flow, OneShot(ticket, Action.FILL, 3.0))}


def test_a_one_shot_is_given_once_per_ticket() -> None:
    desk = Desk()
    assert desk.want(pumps=fill("a")) == [("PU-A", "stop", 0.0), ("PU-A", "fill", 3.0)]
    assert desk.want(pumps=fill("a")) == []
    desk.answer(Result.DONE)
    assert desk.want(pumps=fill("a")) == []
    assert desk.want(pumps=fill("b")) == [("PU-A", "fill", 3.0)]


def test_a_failed_one_shot_is_given_again_and_a_refused_one_is_not() -> None:
    desk = Desk()
    desk.want(pumps=fill("a"))
    desk.answer(Result.FAILED, desk.orders[1])
    desk.now_ns = desk.memory.due_ns
    assert desk.want(pumps=fill("a")) == [("PU-A", "fill", 3.0)]
    desk.answer(Result.REFUSED)
    desk.now_ns += 60 * S
    assert desk.want(pumps=fill("a")) == []


def test_a_filling_waits_until_its_feed_valve_reports_that_it_has_arrived() -> None:
    desk = Desk()
    wanted = {"pumps": fill("a"), "valves": {"V-A": "reagent"}}
    assert desk.want(**wanted) == [("PU-A", "stop", 0.0), ("V-A", "move", 1.0)]
    desk.see("V-A.position", 1.0)  # acquired before the order counts for nothing
    assert desk.want(**wanted) == []
    desk.now_ns = S
    desk.see("V-A.position", -1.0)
    assert desk.want(**wanted) == []
    desk.now_ns = 2 * S
    desk.see("V-A.position", 1.0)
    assert desk.want(**wanted) == [("PU-A", "fill", 3.0)]


def test_a_delivery_from_rest_waits_for_the_outlet_valve_and_a_change_of_rate_does_not() -> None:
    desk = Desk()
    wanted = {"pumps": {"PU-A": PumpDemand(1.0)}, "valves": {"V-C": "collect"}}
    assert desk.want(**wanted) == [("V-C", "move", 1.0)]
    desk.now_ns = S
    desk.see("V-C.position", 1.0)
    assert desk.want(**wanted) == [("PU-A", "deliver", 1.0)]
    desk.answer(Result.DONE)
    faster = {"pumps": {"PU-A": PumpDemand(2.0)}, "valves": {"V-C": "waste"}}
    assert desk.want(**faster) == [("V-C", "move", 0.0), ("PU-A", "deliver", 2.0)]


def test_a_single_syringe_delivers_only_after_it_reports_that_it_has_filled() -> None:
    desk = Desk(program_of(two_pump_rig(syringes=(1, 1))))
    desk.want(pumps=fill("a"))
    desk.answer(Result.DONE)
    assert desk.want(pumps={"PU-A": PumpDemand(1.0)}) == []
    desk.now_ns = S
    desk.see("PU-A.state", float(PumpState.REFILLING))
    assert desk.want(pumps={"PU-A": PumpDemand(1.0)}) == []
    desk.now_ns = 2 * S
    desk.see("PU-A.state", float(PumpState.STOPPED))
    assert desk.want(pumps={"PU-A": PumpDemand(1.0)}) == [("PU-A", "deliver", 1.0)]


def test_a_pump_that_agreed_and_stands_is_told_again_and_not_for_ever() -> None:
    desk = Desk()
    given = 0
    for _ in range(200):
        given += len(desk.want(pumps={"PU-A": PumpDemand(1.0)}))
        desk.answer(Result.DONE)
        desk.now_ns += 200 * MS
        desk.see("PU-A.state", float(PumpState.STOPPED))
    assert given == TRIES
    assert "the pump reports stopped" in desk.events[0].text


def test_a_stop_is_repeated_when_asked_although_it_was_answered() -> None:
    desk = Desk()
    desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()})
    desk.answer(Result.DONE)
    again = frozenset({"PU-A"})
    assert desk.want(Authority.CUT, again, pumps={"PU-A": PumpDemand()}) == [("PU-A", "stop", 0.0)]


def test_the_last_order_that_failed_is_not_what_the_unit_was_told() -> None:
    desk = Desk()
    desk.want(valves={"V-A": "reagent"})
    assert desk.memory.last("V-A", Aspect.POSITION) is not None
    desk.answer(Result.FAILED)
    assert desk.memory.last("V-A", Aspect.POSITION) is None
