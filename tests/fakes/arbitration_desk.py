"""Arbitration with its memory and an image, for tests."""

from __future__ import annotations

from fakes.rigs import program_of

from rigd.logic import arbitration
from rigd.logic.arbitration import Memory
from rigd.logic.demand import Demand
from rigd.logic.program import Program
from rigd.model.devices import DeviceStatus
from rigd.model.events import Event
from rigd.model.orders import Authority, Order, Outcome, Result
from rigd.model.samples import Sample


class Desk:
    """Arbitration with its memory and an image, step by step."""

    def __init__(self, program: Program | None = None) -> None:
        self.program = program or program_of()
        self.memory = Memory()
        self.image: dict[str, Sample] = {}
        self.events: list[Event] = []
        self.now_ns = 0

    def see(self, tag: str, value: float) -> None:
        """A sample acquired now."""
        self.image[tag] = Sample(tag, value, self.now_ns)

    def want(self, authority: Authority = Authority.SEQUENCE, again: frozenset[str] = frozenset(), **parts) -> list:
        """What is ordered for a demand, as (unit, action, value)."""
        demand = Demand(authority, "test", **parts)
        self.memory, orders, events = arbitration.decide(
            self.program, self.memory, demand, self.image, self.now_ns, again
        )
        self.events += events
        self.orders = orders
        return [(order.unit, str(order.action), order.value) for order in orders]

    def answer(self, result: Result, order: Order | None = None) -> None:
        """Answer the last orders, or one."""
        for given in (order,) if order else self.orders:
            outcome = Outcome(given.number, given.unit, given.action, result, self.now_ns, "invented")
            self.note((outcome,))

    def note(self, outcomes: tuple[Outcome, ...] = (), links: tuple[DeviceStatus, ...] = ()) -> None:
        """Outcomes and link changes."""
        self.memory, events = arbitration.note(self.program, self.memory, outcomes, links, self.now_ns)
        self.events += events
