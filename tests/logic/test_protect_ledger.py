"""Volumes and syringe contents from counters, and faults that lapse, given by hand."""

from __future__ import annotations

import pytest
from fakes.rigs import S, program_of, two_pump_rig

from rigd.logic.arbitration import Aspect, Memory, Told
from rigd.logic.program import Program
from rigd.logic.protect import faults, ledger
from rigd.logic.protect.ledger import Content, Ledger
from rigd.model.orders import Action, Authority, Order
from rigd.model.protection import ConditionKind
from rigd.model.samples import Quality, QualityCause, Sample


class Book:
    """A ledger fed with one pump's counters and valve positions."""

    def __init__(self, syringes: int = 2) -> None:
        self.program: Program = program_of(two_pump_rig(syringes=(syringes, syringes)))
        self.ledger: Ledger = ledger.initial(self.program)
        self.memory = Memory()
        self.samples: dict[str, Sample] = {}
        self.t_ns = 0

    def order(self, action: Action) -> None:
        order = Order(1, "PU-A", action, 3.0, Authority.SEQUENCE, "test", self.t_ns)
        self.memory = Memory({("PU-A", Aspect.ONCE): Told(order)})

    def see(self, **values: float) -> dict[str, Sample]:
        """New samples of PU-A's channels, or of a valve by its letter; one second later."""
        self.t_ns += S
        names = {"A": "V-A.position", "C": "V-C.position"}
        new = {tag: Sample(tag, v, self.t_ns) for n, v in values.items() for tag in [names.get(n, f"PU-A.{n}")]}
        self.samples.update(new)
        self.ledger, shown = ledger.update(self.program, self.ledger, self.memory, self.samples, new, self.t_ns)
        return shown

    def count(self, level: float, standby: float, delivered: float = 0.0) -> dict[str, Sample]:
        return self.see(level=level, standby=standby, delivered=delivered)

    @property
    def contents(self) -> tuple[Content, Content]:
        found = self.ledger.counts["PU-A"]
        return found.active, found.standby


def test_what_a_syringe_holds_at_the_start_is_not_known() -> None:
    book = Book()
    book.count(3.0, 0.0)
    assert book.contents == (Content.REAGENT, Content.EMPTY)
    assert book.ledger.used == {}


@pytest.mark.parametrize("position", [0, 1])
def test_a_filling_ordered_where_the_valve_stood_holds_that_liquid(position: int) -> None:
    book = Book()
    book.see(A=position)
    book.count(0.0, 0.0)
    book.order(Action.FILL)
    book.count(0.0, 1.0)
    book.count(0.0, 3.0)
    assert book.contents == (Content.EMPTY, (Content.SOLVENT, Content.REAGENT)[position])
    assert book.ledger.used == {("solvent", "feed-A")[position]: pytest.approx(3.0)}


def test_a_filling_that_began_elsewhere_or_without_an_order_is_not_solvent() -> None:
    book = Book()
    book.see(A=1)
    book.count(0.0, 0.0)
    book.order(Action.FILL)
    book.see(A=0)  # turned while it fills
    book.count(0.0, 3.0)
    assert book.contents[1] is Content.REAGENT
    unordered = Book()
    unordered.see(A=0)
    unordered.count(0.0, 0.0)
    unordered.count(0.0, 3.0)
    assert unordered.contents[1] is Content.REAGENT
    swapping = Book()
    swapping.see(A=0)
    swapping.count(0.0, 0.0)
    swapping.order(Action.SWAP)
    swapping.count(0.0, 3.0)
    assert swapping.contents[1] is Content.REAGENT


@pytest.mark.parametrize("position", [-1.0, -2.0, 7.0])
def test_a_valve_that_is_on_its_way_or_lost_gives_no_solvent(position: float) -> None:
    book = Book()
    book.see(A=0)
    book.see(A=position)
    book.count(0.0, 0.0)
    book.order(Action.FILL)
    book.count(0.0, 3.0)
    assert book.contents[1] is Content.REAGENT
    assert book.ledger.vessels["bottle-S"] == pytest.approx(897.0)  # counted where it was last seen


def test_solvent_on_top_of_reagent_is_reagent_and_contents_change_over() -> None:
    book = Book()
    book.see(A=0)
    book.count(0.0, 1.0)
    book.order(Action.FILL)
    book.count(0.0, 4.0)
    assert book.contents == (Content.EMPTY, Content.REAGENT)
    book.count(4.0, 0.0)  # changed over
    assert book.contents == (Content.REAGENT, Content.EMPTY)
    book.order(Action.FILL)
    book.count(3.0, 2.0, 1.0)
    assert book.contents == (Content.REAGENT, Content.SOLVENT)
    book.count(2.0, 3.0, 1.0)
    book.count(3.0, 2.0, 1.0)
    assert book.contents == (Content.SOLVENT, Content.REAGENT)


def test_a_single_syringe_fills_its_only_one() -> None:
    book = Book(syringes=1)
    book.see(A=0)
    book.count(0.05, 0.0)
    book.order(Action.FILL)
    book.count(2.0, 0.0)
    assert book.contents[0] is Content.SOLVENT
    assert book.ledger.used["solvent"] == pytest.approx(1.95)


def test_rounding_of_the_counters_draws_nothing() -> None:
    book = Book()
    book.see(A=0, C=0)
    book.count(3.0, 2.0)
    for step in range(1, 1000):
        level = round(3.0 - step * 0.0014 + (0.001 if step % 3 else -0.001), 3)
        book.count(level, 2.0, round(step * 0.0014, 3))
    assert sum(book.ledger.used.values()) < 0.01
    assert book.ledger.vessels["waste"] == pytest.approx(1.4, abs=0.002)


def test_delivered_goes_where_the_outlet_last_stood() -> None:
    book = Book()
    book.see(C=0)
    book.count(3.0, 0.0)
    book.count(2.0, 0.0, 1.0)
    book.see(C=-1)
    book.count(1.5, 0.0, 1.5)
    book.see(C=1)
    shown = book.count(1.0, 0.0, 2.0)
    assert {v: book.ledger.vessels[v] for v in ("waste", "flask")} == {"waste": 1.5, "flask": 0.5}
    assert shown["flask.volume"].value == 0.5
    book.see(C=2)  # shut: nowhere
    book.count(0.9, 0.0, 2.1)
    assert book.ledger.vessels["flask"] == 0.5
    assert book.ledger.delivered == {"PU-A": pytest.approx(2.1)}


def test_a_pump_that_restarted_draws_and_delivers_nothing_by_that() -> None:
    book = Book()
    book.see(A=0, C=0)
    book.count(3.0, 2.0, 10.0)
    book.count(3.0, 2.0, 0.0)
    assert book.ledger.used == {}
    assert book.ledger.vessels["waste"] == 0.0
    assert book.contents == (Content.REAGENT, Content.REAGENT)
    book.count(2.0, 2.0, 1.0)
    assert book.ledger.vessels["waste"] == pytest.approx(1.0)


def test_bad_counters_count_nothing() -> None:
    book = Book()
    book.see(A=0, C=0)
    book.count(3.0, 2.0, 0.0)
    book.samples["PU-A.level"] = Sample("PU-A.level", 9.0, 9 * S, Quality.BAD, QualityCause.SENSOR_FAULT)
    book.see(delivered=5.0)
    assert book.ledger.vessels["waste"] == 0.0


def test_faults_lapse_each_at_its_own_time() -> None:
    program = program_of()
    state = faults.report(faults.initial(program, 0), [("scan", "late")], 5)
    state = faults.report(state, [("journal", "full")], 9)
    assert state.due_ns == 5
    state, gone = faults.lapse(state, 5)
    assert gone == ((ConditionKind.FAULT, "scan"),)
    assert (state.due_ns, state.detail(ConditionKind.FAULT, "journal")) == (9, "full")
    state, gone = faults.lapse(state, 8)
    assert gone == ()
