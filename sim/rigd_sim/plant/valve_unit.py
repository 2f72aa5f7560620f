"""A selector valve that takes time to move.

While it moves the old port stays open for 40 % of the travel, then all ports are shut for 20 %, then the new one is
open: a modelling choice between make-before-break and break-before-make valves (assumption). Times are whole
nanoseconds, so that a change of port is never missed or seen twice.
"""

from __future__ import annotations

from dataclasses import dataclass

from rigd.model.devices import VALVE_LOST, VALVE_MOVING
from rigd.model.rig import Valve
from rigd_sim.plant.levers import ValveLever

LEAVES, ARRIVES = 0.4, 0.6
SHUT = -1
NEVER_NS = 1 << 62


@dataclass(slots=True)
class ValveUnit:
    """Where a valve is; ``claimed`` is what it says when it lies."""

    spec: Valve
    position: int = 0
    target: int = 0
    claimed: int = 0
    leaves_ns: int = 0
    arrives_ns: int = 0
    end_ns: int = 0

    def __post_init__(self) -> None:
        self.position = self.target = self.claimed = self.spec.index(self.spec.rest)

    def tell(self, index: float, now_ns: int, lever: ValveLever) -> str:
        """Order a move; "" or the reason of a refusal."""
        wanted = int(index)
        if wanted != index or not 0 <= wanted < len(self.spec.positions):
            return "value"
        self.settle(now_ns)
        self.claimed = wanted
        if not (lever.stuck or lever.lost or lever.liar) and wanted != self.target:
            here = self.open_port(now_ns)
            self.position = here if here != SHUT else self.position
            self.target = wanted
            travel_ns = round(self.spec.travel_s * lever.slow * 1e9)
            self.leaves_ns, self.arrives_ns = (now_ns + round(f * travel_ns) for f in (LEAVES, ARRIVES))
            self.end_ns = now_ns + travel_ns
        return ""

    def restart(self, now_ns: int) -> None:
        """Power was lost and came back: go to the rest position."""
        self.tell(self.spec.index(self.spec.rest), now_ns, ValveLever())

    def settle(self, now_ns: int) -> None:
        """Arrive if the travel is over."""
        if now_ns >= self.end_ns:
            self.position = self.target

    def open_port(self, now_ns: int) -> int:
        """Index of the port that is open to the common one now; ``SHUT`` in the middle of a move."""
        if self.position == self.target or now_ns < self.leaves_ns:
            return self.position
        return SHUT if now_ns < self.arrives_ns else self.target

    def next_event_ns(self, now_ns: int) -> int:
        """When the open port changes next."""
        if self.position == self.target:
            return NEVER_NS
        return min(t for t in (self.leaves_ns, self.arrives_ns, max(self.end_ns, now_ns + 1)) if t > now_ns)

    def feedback(self, now_ns: int, lever: ValveLever) -> int:
        """What the valve says: an index, moving or lost."""
        if lever.lost:
            return VALVE_LOST
        if lever.liar:
            return self.claimed
        return VALVE_MOVING if self.position != self.target and now_ns < self.end_ns else self.target
