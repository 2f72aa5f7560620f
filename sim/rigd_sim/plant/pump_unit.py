"""A syringe pump: what its motor does, what it counts and what it believes.

Volumes in m3, rates in m3/s inside. ``counted`` is what the pump thinks it can still deliver; the true content of
a syringe
is the node volume of the layout less its dead volume. The pump changes over by itself when a syringe of two is
empty; it never
fills by itself.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from rigd.model.devices import PumpState
from rigd.model.orders import Action
from rigd.model.rig import Pump
from rigd_sim.physics.constants import BAR_PA, ML_M3, ML_MIN_M3_S
from rigd_sim.plant.levers import PumpLever

NOTHING_M3 = 1e-15
DRIVE_MARGIN = 1.25
"""A pump without a stated force limit stalls at this factor times its rating (assumption)."""


@dataclass(slots=True)
class Stroke:
    """True displacement of one step: out of the active syringe, into the filling one, and which they are [m3]."""

    delivered: float = 0.0
    drawn: float = 0.0
    active: int = 0
    filling: int = 0


@dataclass(slots=True)
class PumpUnit:
    """State of one pump. ``rate`` is what was ordered [m3/s]."""

    spec: Pump
    state: PumpState = PumpState.STOPPED
    rate: float = 0.0
    active: int = 0
    filling: int = -1
    fill_to: float = 0.0
    counted: list[float] = field(default_factory=list)
    delivered: float = 0.0
    travelled: float = 0.0
    slack: float = 0.0

    def __post_init__(self) -> None:
        self.counted = [0.0] * self.spec.syringes

    @property
    def area(self) -> float:
        """Piston area [m2]."""
        return math.pi * (self.spec.bore_mm * 1e-3) ** 2 / 4.0

    @property
    def stall_pressure(self) -> float:
        """Pressure at which the motor gives up [Pa gauge]: force over area."""
        if self.spec.force_limit_N > 0.0:
            return self.spec.force_limit_N / self.area
        return DRIVE_MARGIN * self.spec.rating_bar * BAR_PA

    @property
    def moving(self) -> bool:
        """True while the active syringe delivers."""
        return self.state is PumpState.DELIVERING

    def standby(self) -> int:
        """Index of the syringe that a fill goes to."""
        return (self.active + 1) % self.spec.syringes

    def tell(self, action: Action, value: float, lever: PumpLever) -> str:
        """Carry out an order; "" or the reason of a refusal."""
        if action is Action.STOP or (action is Action.DELIVER and value == 0.0):
            if not (lever.deaf or lever.deaf_stop):
                self.stop()
            return ""
        if action is Action.DELIVER:
            return self._deliver(value, lever)
        if action is Action.FILL:
            return self._fill(value * ML_M3, lever)
        if action is Action.SWAP:
            return self._swap(lever)
        return "word"

    def stop(self) -> None:
        """All motion ends; a stall or an empty end position is left behind."""
        self.state, self.rate, self.filling = PumpState.STOPPED, 0.0, -1

    def restart(self) -> None:
        """Power was lost and came back: at rest, counter at zero."""
        self.stop()
        self.delivered = 0.0

    def _deliver(self, value: float, lever: PumpLever) -> str:
        if not self.spec.rate_min_mL_min <= value <= self.spec.rate_max_mL_min:
            return "value"
        if self.state is PumpState.STALLED:
            return "stalled"
        if self.state is PumpState.REFILLING:
            return "state"
        if self.counted[self.active] <= NOTHING_M3 and not self._change_over(lever):
            return "state"
        if not lever.deaf:
            self.rate = value * ML_MIN_M3_S
            self.state = PumpState.DELIVERING
        return ""

    def _fill(self, volume: float, lever: PumpLever) -> str:
        if not 0.0 <= volume <= self.spec.stroke_mL * ML_M3 * (1.0 + 1e-9):
            return "value"
        syringe = self.standby()
        if self.filling >= 0 or (self.spec.syringes == 1 and self.moving):
            return "state"
        if lever.deaf or volume <= self.counted[syringe]:
            return ""
        self.filling, self.fill_to = syringe, volume
        if self.spec.syringes == 1:
            self.state = PumpState.REFILLING
        elif self.state is PumpState.EMPTY:
            self.state = PumpState.STOPPED
        return ""

    def _swap(self, lever: PumpLever) -> str:
        if self.spec.syringes == 1 or self.filling >= 0 or self.counted[self.standby()] <= NOTHING_M3:
            return "state"
        if not lever.deaf:
            self._change_over(lever)
        return ""

    def _change_over(self, lever: PumpLever) -> bool:
        """Take the other syringe if it holds liquid; a fill of it is broken off."""
        other = self.standby()
        if self.spec.syringes == 1 or self.counted[other] <= NOTHING_M3:
            return False
        if self.filling == other:
            self.filling = -1
        self.active, self.slack = other, lever.slack
        return True

    def next_event(self) -> float:
        """Seconds until a syringe is empty or full, at present rates."""
        until = math.inf
        if self.moving and self.rate > 0.0:
            until = self.counted[self.active] / self.rate
        if self.filling >= 0:
            left = self.fill_to - self.counted[self.filling]
            until = min(until, left / (self.spec.refill_rate_mL_min * ML_MIN_M3_S))
        return max(until, 0.0)

    def stroke(self, h: float, lever: PumpLever) -> Stroke:
        """What the screw does in ``h`` seconds (events are left to ``settle``)."""
        out = Stroke(active=self.active, filling=max(self.filling, 0))
        if self.moving and not lever.stall:
            turned = min(self.rate * h, self.counted[self.active])
            self.counted[self.active] -= turned
            self.delivered += turned
            lost = min(self.slack, turned)
            self.slack -= lost
            out.delivered = (turned - lost) * lever.gain + self._ripple(turned, lever.ripple)
        if self.filling >= 0:
            drawn = min(self.spec.refill_rate_mL_min * ML_MIN_M3_S * h, self.fill_to - self.counted[self.filling])
            self.counted[self.filling] += drawn
            out.drawn = 0.0 if lever.no_draw else drawn * lever.gain
        return out

    def _ripple(self, turned: float, depth: float) -> float:
        """Periodic error of the screw: flow q (1 + depth sin(2 pi x / pitch)), integrated exactly over the move."""
        x0 = self.travelled
        self.travelled = x0 + turned / self.area
        if depth == 0.0:
            return 0.0
        k = 2.0 * math.pi / (self.spec.screw_pitch_mm * 1e-3)
        return self.area * depth / k * (math.cos(k * x0) - math.cos(k * self.travelled))

    def settle(self, pressure: float, lever: PumpLever) -> bool:
        """End of a step: end positions, change-over, stall. True if anything changed."""
        changed = False
        if self.filling >= 0 and self.fill_to - self.counted[self.filling] <= NOTHING_M3:
            self.counted[self.filling] = self.fill_to
            self.filling = -1
            if self.state is PumpState.REFILLING:
                self.state = PumpState.STOPPED
            self.slack = lever.slack
            changed = True
        if self.moving and self.counted[self.active] <= NOTHING_M3:
            self.counted[self.active] = 0.0
            if not self._change_over(lever):
                self.state, self.rate = PumpState.EMPTY, 0.0
            changed = True
        if self.moving and (pressure > self.stall_pressure or lever.stall):
            self.state, self.rate = PumpState.STALLED, 0.0
            changed = True
        return changed
