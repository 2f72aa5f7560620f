"""The flush of a quench, by syringe content, on a plant without physics."""

from __future__ import annotations

import pytest
from fakes.rehearsal import Rehearsal, StandIn, sequence_demand
from fakes.rigs import program_of, two_pump_rig

from rigd.logic.demand import Demand, OneShot, PumpDemand
from rigd.logic.protect import flush
from rigd.logic.protect.ledger import Content
from rigd.model.devices import LinkState, PumpState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Action, Authority, Stop, Verb


def stops(rehearsal: Rehearsal) -> list[Event]:
    return rehearsal.happened(EventKind.STOP)


def fill(name: str, volume: float) -> OneShot:
    return OneShot(f"test-{name}", Action.FILL, volume)


def demand(flow: float, once: dict[str, OneShot], positions: dict[str, str]) -> Demand:
    pumps = {pump: PumpDemand(flow, once.get(pump)) for pump in ("PU-A", "PU-B")}
    return sequence_demand(pumps=pumps, valves=positions)


def filled(positions: dict[str, str], syringes: tuple[int, int] = (2, 2), volume: float = 4.0) -> Rehearsal:
    """Empty pumps, filled in one syringe each from these valve positions, then changed over (dual) and delivering."""
    rehearsal = Rehearsal(program_of(two_pump_rig(syringes=syringes)), StandIn(None))
    rehearsal.ready()
    once = {pump: fill(pump, volume) for pump in ("PU-A", "PU-B")}
    rehearsal.conduct.want = demand(0.0, once, positions)
    rehearsal.run(40.0)
    if syringes == (2, 2):
        swaps = {pump: OneShot(f"swap-{pump}", Action.SWAP, 0.0) for pump in ("PU-A", "PU-B")}
        rehearsal.conduct.want = demand(0.0, swaps, positions)
        rehearsal.run(3.0)
    rehearsal.conduct.want = demand(0.5, {}, positions)
    rehearsal.run(20.0)
    assert rehearsal.pump("PU-A").state is PumpState.DELIVERING
    return rehearsal


def contents(rehearsal: Rehearsal, pump: str) -> tuple[Content, Content]:
    count = rehearsal.state.protect.ledger.counts[pump]
    return count.active, count.standby


SOLVENT = {"V-A": "solvent", "V-B": "solvent"}
REAGENT = {"V-A": "reagent", "V-B": "reagent"}
MIXED = {"V-A": "reagent", "V-B": "solvent"}


def test_contents_follow_the_valve_at_the_time_of_filling() -> None:
    rehearsal = filled(MIXED)
    assert contents(rehearsal, "PU-A") == (Content.REAGENT, Content.EMPTY)
    assert contents(rehearsal, "PU-B") == (Content.SOLVENT, Content.EMPTY)


def test_liquids_and_vessels_are_counted_from_samples() -> None:
    rehearsal = filled(MIXED)
    rehearsal.conduct.want = demand(0.5, {}, {**MIXED, "V-C": "collect"})
    rehearsal.run(60.0)
    ledger = rehearsal.state.protect.ledger
    assert ledger.used["feed-A"] == pytest.approx(4.0, abs=0.02)
    assert ledger.used["solvent"] == pytest.approx(4.0, abs=0.02)
    assert ledger.vessels["bottle-A"] == pytest.approx(226.0, abs=0.02)
    delivered = rehearsal.pump("PU-A").delivered_mL + rehearsal.pump("PU-B").delivered_mL
    assert ledger.vessels["flask"] + ledger.vessels["waste"] == pytest.approx(delivered, abs=0.05)
    assert ledger.vessels["flask"] == pytest.approx(1.0, abs=0.06)  # 1 mL/min for a minute, travel time apart
    assert rehearsal.state.protect.signals.samples["flask.volume"].value == ledger.vessels["flask"]


def test_solvent_in_both_pumps_flushes_at_once_and_ends_at_rest() -> None:
    rehearsal = filled(SOLVENT)
    target = flush.target_mL(rehearsal.program)
    delivered = rehearsal.state.protect.ledger.delivered
    before = sum(delivered.values())
    rehearsal.ask(Verb.STOP)
    rehearsal.run(900.0, until=lambda: rehearsal.end() is not None)
    assert sum(rehearsal.state.protect.ledger.delivered.values()) - before >= target
    verdict = rehearsal.conduct.views[-1].verdict
    assert (verdict.stop, verdict.stop_done, verdict.quench_active) == (Stop.QUENCH, True, False)
    assert [event.subject for event in stops(rehearsal)] == ["none", "quench", "quench", "quench"]
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    end = rehearsal.end()
    assert end is not None
    assert end.outcome == "stopped"


def test_a_pump_that_holds_reagent_fills_its_empty_syringe_with_solvent_first() -> None:
    rehearsal = filled(REAGENT)
    for _ in range(3):  # use up the reagent down to 1 mL, as at the end of a syringe
        rehearsal.run(60.0)
    assert contents(rehearsal, "PU-A") == (Content.REAGENT, Content.EMPTY)
    asked_ns = rehearsal.now_ns
    rehearsal.ask(Verb.STOP)
    reagent_left = rehearsal.pump("PU-A").level_mL
    rehearsal.run(1.0)
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    rehearsal.run(1200.0, until=lambda: rehearsal.end() is not None)
    mine = [order for order in rehearsal.orders if order.unit == "PU-A" and order.t_ns >= asked_ns]
    assert [str(order.action) for order in mine[:4]] == ["stop", "fill", "swap", "deliver"]
    assert {order.authority for order in mine} == {Authority.QUENCH}
    moved = next(order for order in rehearsal.orders if order.unit == "V-A" and order.t_ns >= asked_ns)
    assert moved.t_ns < mine[1].t_ns  # switch, confirm, then fill
    pump = rehearsal.pump("PU-A")
    assert pump.state is PumpState.STOPPED
    assert "no solvent was left" not in stops(rehearsal)[-2].text
    assert pump.standby_mL == pytest.approx(reagent_left, abs=0.01)  # the reagent stayed where it was


def test_reagent_in_both_syringes_of_every_pump_is_a_cut_and_says_so() -> None:
    rehearsal = filled(REAGENT)
    once = {pump: OneShot(f"again-{pump}", Action.FILL, 5.0) for pump in ("PU-A", "PU-B")}
    rehearsal.conduct.want = demand(0.5, once, REAGENT)
    rehearsal.run(45.0)
    assert contents(rehearsal, "PU-A") == (Content.REAGENT, Content.REAGENT)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(2.0)
    found = stops(rehearsal)
    assert found[1].subject == "cut"
    assert "no pump can deliver solvent" in found[1].text
    assert rehearsal.conduct.views[-1].verdict.stop is Stop.CUT
    end = rehearsal.end()
    assert end is not None
    assert end.outcome == "stopped"


def test_only_the_solvent_pump_flushes_and_the_other_is_named() -> None:
    rehearsal = filled(MIXED)
    rehearsal.pump("PU-A").standby_mL = 3.0  # unknown content: reagent
    rehearsal.run(2.0)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(20.0)
    assert "by PU-B. PU-A may hold reagent and cannot be flushed: stopped." in stops(rehearsal)[1].text
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    assert rehearsal.pump("PU-B").state is PumpState.DELIVERING
    assert rehearsal.pump("PU-B").rate_mL_min == pytest.approx(2.0)


def test_a_single_syringe_with_reagent_stays_stopped_and_one_with_solvent_refills() -> None:
    rehearsal = filled(MIXED, syringes=(1, 1))
    asked_ns = rehearsal.now_ns
    rehearsal.ask(Verb.STOP)
    rehearsal.run(1200.0, until=lambda: rehearsal.end() is not None)
    told = {
        name: [str(o.action) for o in rehearsal.orders if o.unit == name and o.t_ns >= asked_ns]
        for name in ("PU-A", "PU-B")
    }
    assert told["PU-A"] == ["stop"]
    assert told["PU-B"][:2] == ["deliver", "stop"]
    assert "fill" in told["PU-B"]
    assert rehearsal.conduct.views[-1].verdict.stop is Stop.QUENCH


@pytest.mark.parametrize("trouble", ["pressure", "device", "valve", "overpressure"])
def test_a_condition_that_fails_in_the_middle_of_the_flush_is_a_cut(trouble: str) -> None:
    rehearsal = filled(SOLVENT)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(10.0)
    assert rehearsal.conduct.views[-1].verdict.quench_active
    if trouble == "pressure":
        rehearsal.silent.add("PT-1")
    elif trouble == "device":
        rehearsal.link("pump-B", LinkState.FAILED)
    elif trouble == "valve":
        rehearsal.plant.units["V-C"].position = -2.0
    else:
        rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(3.0)
    verdict = rehearsal.conduct.views[-1].verdict
    assert verdict.stop is Stop.CUT
    rehearsal.run(3.0)
    assert rehearsal.pump("PU-A").state is PumpState.STOPPED
    assert rehearsal.pump("PU-B").state is PumpState.STOPPED


@pytest.mark.parametrize("positions", [SOLVENT, REAGENT])
def test_a_flush_that_ends_in_order_raises_no_alarm_about_pumps(positions: dict[str, str]) -> None:
    """The patience with a pump counts from its own stop at the end of the flush, not from the quench minutes before."""
    rehearsal = filled(positions)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(900.0)
    assert rehearsal.state.protect.stopping.done
    assert not [event for event in rehearsal.happened(EventKind.ALARM) if event.subject == "STOP-UNCONFIRMED"]


def test_nothing_delivered_means_nothing_to_flush() -> None:
    rehearsal = Rehearsal(program_of())
    rehearsal.ready()
    rehearsal.ask(Verb.STOP)
    rehearsal.run(3.0)
    assert "nothing to flush" in stops(rehearsal)[1].text
    assert rehearsal.end() is not None


def test_the_sequence_moves_nothing_during_a_quench() -> None:
    rehearsal = filled(SOLVENT)
    asked_ns = rehearsal.now_ns
    rehearsal.ask(Verb.STOP)
    rehearsal.conduct.want = demand(5.0, {}, REAGENT)
    rehearsal.run(30.0)
    late = [order for order in rehearsal.orders if order.t_ns >= asked_ns]
    assert {order.authority for order in late} == {Authority.QUENCH}


def test_a_flush_that_does_not_get_on_is_cut_in_its_time() -> None:
    rehearsal = filled(SOLVENT)
    rehearsal.ask(Verb.STOP)
    asked_ns = rehearsal.now_ns
    rehearsal.deaf.update(("PU-A", "PU-B"))
    for name in ("PU-A", "PU-B"):
        rehearsal.pump(name).state = PumpState.STOPPED
    rehearsal.run(900.0, until=lambda: stops(rehearsal)[-1].subject == "cut")
    assert "the flush was not done in time (0.0 of" in stops(rehearsal)[-1].text
    target = flush.target_mL(rehearsal.program)
    at_least_s = 60.0 * target / rehearsal.program.rig.flush_mL_min
    assert 2 * at_least_s < (rehearsal.now_ns - asked_ns) / 1e9 < 2 * at_least_s + 60.0 + 90.0


def test_every_stop_event_names_its_cause() -> None:
    rehearsal = filled(SOLVENT)
    rehearsal.ask(Verb.STOP)
    rehearsal.run(5.0)
    rehearsal.sensors["PT-1"] = 9.0
    rehearsal.run(3.0)
    causes = [(event.subject, event.fields["cause"]) for event in stops(rehearsal)]
    assert causes == [("none", ""), ("quench", "STOP-REQUEST"), ("cut", "PRESSURE-HIGH"), ("cut", "PRESSURE-HIGH")]
    assert {order.source for order in rehearsal.orders if order.authority is Authority.CUT and order.t_ns > 0} == {
        "PRESSURE-HIGH"
    }
