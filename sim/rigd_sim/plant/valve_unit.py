"""A selector valve that takes time to move.

While it moves the old port stays open for 40 % of the travel, then all ports are shut for 20 %, then the new one
is open:
a modelling choice between make-before-break and break-before-make valves (assumption).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from rigd.model.devices import VALVE_LOST, VALVE_MOVING
from rigd.model.rig import Valve
from rigd_sim.plant.levers import ValveLever

LEAVES, ARRIVES = 0.4, 0.6
SHUT = -1


@dataclass(slots=True)
class ValveUnit:
    """Where a valve is. Times in seconds of plant time."""

    spec: Valve
    position: int = 0
    target: int = 0
    claimed: int = 0
    start_s: float = -math.inf
    travel_s: float = 0.0

    def __post_init__(self) -> None:
        self.position = self.target = self.claimed = self.spec.index(self.spec.rest)

    def tell(self, index: float, now_s: float, lever: ValveLever) -> str:
        """Order a move; "" or the reason of a refusal."""
        wanted = int(index)
        if wanted != index or not 0 <= wanted < len(self.spec.positions):
            return "value"
        self.settle(now_s)
        self.claimed = wanted
        if not (lever.stuck or lever.lost or lever.liar) and wanted != self.target:
            here = self.open_port(now_s)
            self.position = here if here != SHUT else self.position
            self.target, self.start_s = wanted, now_s
            self.travel_s = self.spec.travel_s * lever.slow
        return ""

    def restart(self, now_s: float) -> None:
        """Power was lost and came back: go to the rest position."""
        self.tell(self.spec.index(self.spec.rest), now_s, ValveLever())

    def moving(self, now_s: float) -> bool:
        """True during travel."""
        return self.position != self.target and now_s < self.start_s + self.travel_s

    def settle(self, now_s: float) -> None:
        """Arrive if the travel is over."""
        if self.position != self.target and not self.moving(now_s):
            self.position = self.target

    def open_port(self, now_s: float) -> int:
        """Index of the port that is open to the common one now; ``SHUT`` in the middle of a move."""
        if self.position == self.target:
            return self.position
        part = (now_s - self.start_s) / self.travel_s if self.travel_s > 0.0 else 1.0
        if part < LEAVES:
            return self.position
        return SHUT if part < ARRIVES else self.target

    def next_event(self, now_s: float) -> float:
        """Seconds until the open port changes."""
        if self.position == self.target:
            return math.inf
        ahead = [self.start_s + f * self.travel_s - now_s for f in (LEAVES, ARRIVES, 1.0)]
        return min((a for a in ahead if a > 1e-9), default=0.0)

    def feedback(self, now_s: float, lever: ValveLever) -> int:
        """What the valve says: an index, moving or lost."""
        if lever.lost:
            return VALVE_LOST
        if lever.liar:
            return self.claimed
        if self.moving(now_s):
            return VALVE_MOVING
        return self.target if self.position != self.target else self.position
