"""Details of arbitration that only a close look shows: times at their edges, who is patient, what is remembered."""

from __future__ import annotations

import pytest
from fakes.arbitration_desk import Desk
from fakes.rigs import MS, S, program_of, two_pump_rig

from rigd.logic import arbitration
from rigd.logic.arbitration import NEVER_NS, Aspect, Told
from rigd.logic.demand import OneShot, PumpDemand
from rigd.model.devices import DeviceStatus, LinkState, PumpState
from rigd.model.orders import Action, Authority, Order, Outcome, Result

RUN = {"PU-A": PumpDemand(1.0)}
MOVE = {"V-A": "reagent"}


def told(desk: Desk, unit: str, aspect: Aspect) -> Told:
    return desk.memory.told[unit, aspect]


def test_figures_that_the_rest_relies_on() -> None:
    assert arbitration.TRIES == 3
    assert arbitration.PAUSES_NS == (200 * MS, 500 * MS, S, 2 * S)
    assert arbitration.STANDS_NS == S
    assert NEVER_NS == 1 << 62
    assert [int(aspect) for aspect in Aspect] == [0, 1, 2, 3, 4]  # kept in journals of states, in this order


def test_what_is_ordered_has_been_tried_once_and_is_not_answered() -> None:
    order = Order(1, "V-A", Action.MOVE, 1.0, Authority.CUT, "test", 0)
    assert Told(order) == Told(order, "", None, 0, 1, NEVER_NS)


def test_the_pauses_between_tries_grow_to_two_seconds() -> None:
    desk = Desk()
    pauses = []
    for _ in range(6):
        assert desk.want(Authority.CUT, pumps={"PU-A": PumpDemand()})
        desk.answer(Result.FAILED)
        pauses.append(desk.memory.due_ns - desk.now_ns)
        desk.now_ns = desk.memory.due_ns
    assert pauses == [200 * MS, 500 * MS, S, 2 * S, 2 * S, 2 * S]


def test_a_link_that_comes_back_hurries_only_what_failed() -> None:
    desk = Desk()
    desk.want(valves=MOVE)
    desk.answer(Result.DONE)
    desk.note(links=(DeviceStatus("valve-A", LinkState.ONLINE, 0),))
    assert desk.memory.due_ns == NEVER_NS
    desk.want(valves={"V-A": "solvent"})
    desk.answer(Result.FAILED)
    desk.note(links=(DeviceStatus("valve-A", LinkState.DEGRADED, 0),))
    assert desk.memory.due_ns == 200 * MS
    desk.note(links=(DeviceStatus("valve-A", LinkState.ONLINE, 0),))
    assert desk.memory.due_ns == 0


def test_an_answer_to_an_order_that_nobody_remembers_is_told_and_changes_nothing() -> None:
    desk = Desk()
    desk.note((Outcome(9, "V-A", Action.MOVE, Result.FAILED, 0, "no reply"),))
    assert desk.memory.told == {}
    assert [event.subject for event in desk.events] == ["V-A"]


@pytest.mark.parametrize(
    ("authority", "parts", "patient"),
    [
        (Authority.QUENCH, {"valves": MOVE}, True),
        (Authority.HOLD, {"valves": MOVE}, False),
        (Authority.SEQUENCE, {"pumps": {"PU-A": PumpDemand()}}, True),
    ],
)
def test_who_tries_for_ever(authority: Authority, parts: dict, patient: bool) -> None:
    desk = Desk()
    given = 0
    for _ in range(100):
        given += len(desk.want(authority, **parts))
        desk.answer(Result.FAILED)
        desk.now_ns += 200 * MS
    assert (given > arbitration.TRIES) is patient


def test_a_demand_that_needs_nothing_more_is_remembered_also_when_nothing_was_ordered_for_it() -> None:
    desk = Desk()
    desk.want(valves={**MOVE, "V-B": "reagent"})
    desk.answer(Result.DONE)
    desk.want(valves={**MOVE, "V-B": "reagent"})
    assert desk.memory.settled is not None
    assert dict(desk.memory.settled.valves) == {**MOVE, "V-B": "reagent"}
    assert desk.want(valves=MOVE) == []
    assert dict(desk.memory.settled.valves) == MOVE
    before = desk.memory
    assert desk.want(valves=MOVE) == []
    assert desk.memory is before


def test_a_demand_that_still_waits_is_not_settled() -> None:
    desk = Desk()
    desk.want(valves={"V-C": "collect"}, pumps=RUN)
    assert desk.memory.settled is None


def test_a_one_shot_without_a_ticket_is_not_the_one_that_had_one() -> None:
    desk = Desk()
    desk.want(pumps={"PU-A": PumpDemand(0.0, OneShot("a", Action.FILL, 3.0))})
    again = {"PU-A": PumpDemand(0.0, OneShot("", Action.FILL, 3.0))}
    assert desk.want(pumps=again) == [("PU-A", "fill", 3.0)]


@pytest.mark.parametrize(("later_ns", "tries"), [(60 * S, 2), (60 * S + 1, 1)])
def test_what_worked_for_a_minute_counts_anew(later_ns: int, tries: int) -> None:
    desk = Desk()
    desk.want(valves=MOVE)
    desk.now_ns = later_ns
    desk.answer(Result.FAILED)
    desk.memory = arbitration.Memory(
        {key: Told(held.order, result=held.result, retry_ns=0) for key, held in desk.memory.told.items()},
        desk.memory.number,
    )
    assert desk.want(valves=MOVE)
    assert told(desk, "V-A", Aspect.POSITION).tries == tries


def test_a_pump_that_has_not_agreed_yet_may_stand() -> None:
    desk = Desk()
    desk.want(pumps=RUN)
    desk.now_ns = 5 * S
    desk.see("PU-A.state", float(PumpState.STOPPED))
    assert desk.want(pumps=RUN) == []
    assert desk.events == []


def test_a_pump_that_agreed_has_a_second_to_start() -> None:
    desk = Desk()
    desk.now_ns = 10 * S
    desk.want(pumps=RUN)
    desk.answer(Result.DONE)
    desk.now_ns += S
    desk.see("PU-A.state", float(PumpState.STOPPED))
    assert desk.want(pumps=RUN) == []
    desk.now_ns += 1
    desk.see("PU-A.state", float(PumpState.STOPPED))
    assert desk.want(pumps=RUN) == [("PU-A", "deliver", 1.0)]


def test_a_single_syringe_that_was_never_filled_delivers_at_once() -> None:
    desk = Desk(program_of(two_pump_rig(syringes=(1, 1))))
    assert desk.want(pumps=RUN) == [("PU-A", "deliver", 1.0)]


def test_a_state_acquired_before_the_pump_agreed_to_fill_says_nothing_about_the_filling() -> None:
    desk = Desk(program_of(two_pump_rig(syringes=(1, 1))))
    desk.want(pumps={"PU-A": PumpDemand(0.0, OneShot("a", Action.FILL, 3.0))})
    desk.now_ns = S
    desk.see("PU-A.state", float(PumpState.STOPPED))
    desk.now_ns = 2 * S
    desk.answer(Result.DONE)
    assert desk.want(pumps=RUN) == []
    desk.now_ns = 3 * S
    desk.see("PU-A.state", float(PumpState.STOPPED))
    assert desk.want(pumps=RUN) == [("PU-A", "deliver", 1.0)]
