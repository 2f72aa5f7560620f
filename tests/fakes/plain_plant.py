"""A plant without physics, for tests of emulators and servers: pumps count, valves travel, baths jump."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from rigd.model.devices import VALVE_MOVING, PumpState
from rigd.model.errors import ConfigError
from rigd.model.orders import Action
from rigd.model.problems import Problem
from rigd.model.samples import Reading, Spectrum
from rigd.ports.plant import FaultSpec

STEP_s = 0.01
_EMPTY_mL = 1e-9


@dataclass(slots=True)
class PlainPump:
    """Volumes in mL, rates in mL/min; the active syringe delivers, the target of a filling is the other one."""

    syringes: int = 2
    stroke_mL: float = 5.0
    refill_mL_min: float = 8.0
    level_mL: float = 5.0
    standby_mL: float = 5.0
    delivered_mL: float = 0.0
    rate_mL_min: float = 0.0
    fill_to_mL: float = 0.0
    state: PumpState = PumpState.STOPPED

    def step(self, dt_s: float) -> None:
        """Move the screws for ``dt_s``."""
        self._fill(dt_s)
        if self.state is not PumpState.DELIVERING:
            return
        moved_mL = min(self.level_mL, self.rate_mL_min * dt_s / 60)
        self.level_mL -= moved_mL
        self.delivered_mL += moved_mL
        if self.level_mL <= _EMPTY_mL and not self._change_over():
            self.state = PumpState.EMPTY

    def tell(self, action: Action, value: float) -> str:
        """Take a command."""
        if action is Action.STOP:
            self.state, self.fill_to_mL = PumpState.STOPPED, 0.0
        elif action is Action.FILL:
            if self.fill_to_mL:
                return "state: that syringe is moving"
            self.fill_to_mL = value
            self.state = PumpState.REFILLING if self.syringes == 1 else self.state
        elif action is Action.SWAP:
            if self.fill_to_mL:
                return "state: standby is filling"
            self.level_mL, self.standby_mL = self.standby_mL, self.level_mL
        elif self.level_mL <= _EMPTY_mL and not self._change_over():
            return "state: empty"
        else:
            self.state, self.rate_mL_min = PumpState.DELIVERING, value
        return ""

    def channels(self) -> dict[str, float]:
        """The channels of every pump."""
        flow = self.rate_mL_min if self.state is PumpState.DELIVERING else 0.0
        volumes = {"level": self.level_mL, "standby": self.standby_mL, "delivered": self.delivered_mL}
        return {"flow": flow, **volumes, "state": float(self.state)}

    def _change_over(self) -> bool:
        if self.syringes == 1 or self.fill_to_mL or self.standby_mL <= _EMPTY_mL:
            return False
        self.level_mL, self.standby_mL = self.standby_mL, self.level_mL
        return True

    def _fill(self, dt_s: float) -> None:
        if not self.fill_to_mL:
            return
        drawn_mL = self.refill_mL_min * dt_s / 60
        if self.syringes == 1:
            self.level_mL = min(self.fill_to_mL, self.level_mL + drawn_mL)
        else:
            self.standby_mL = min(self.fill_to_mL, self.standby_mL + drawn_mL)
        if (self.level_mL if self.syringes == 1 else self.standby_mL) >= self.fill_to_mL:
            self.fill_to_mL = 0.0
            self.state = PumpState.STOPPED if self.state is PumpState.REFILLING else self.state


@dataclass(slots=True)
class PlainValve:
    """Position index, or the two codes for moving and lost."""

    position: float = 0.0
    travel_s: float = 1.0
    target: float = 0.0
    left_s: float = 0.0

    def step(self, dt_s: float) -> None:
        """Turn for ``dt_s``."""
        if self.left_s > 0:
            self.left_s -= dt_s
            self.position = self.target if self.left_s <= 0 else VALVE_MOVING

    def tell(self, action: Action, value: float) -> str:
        """Move; to where it is already it does nothing."""
        if value != self.position:
            self.position, self.target, self.left_s = VALVE_MOVING, value, self.travel_s
        return ""

    def channels(self) -> dict[str, float]:
        """The channel of every valve."""
        return {"position": self.position}


@dataclass(slots=True)
class PlainBath:
    """A bath that is at its set-point at once while it circulates."""

    bath_degC: float = 22.0
    setpoint_degC: float = 20.0
    circulating: float = 0.0
    low_level: bool = False

    def step(self, dt_s: float) -> None:
        """Nothing is slow here."""
        if self.circulating:
            self.bath_degC = self.setpoint_degC

    def tell(self, action: Action, value: float) -> str:
        """Take a set-point or a switch."""
        if action is Action.SET_TEMPERATURE:
            self.setpoint_degC = value
        elif value and self.low_level:
            return "low level"
        else:
            self.circulating = value
        return ""

    def channels(self) -> dict[str, float]:
        """The channels of every chiller."""
        return {"bath": self.bath_degC, "setpoint": self.setpoint_degC, "circulating": self.circulating}


@dataclass
class PlainPlant:
    """A ``rigd.ports.plant.Plant`` from plain parts. ``owners`` maps a device to its unit where they differ."""

    units: dict[str, PlainPump | PlainValve | PlainBath] = field(default_factory=dict)
    owners: Mapping[str, str] = field(default_factory=dict)
    inputs: dict[str, Reading] = field(default_factory=dict)
    points: int = 5
    start_per_cm: float = 860.0
    step_per_cm: float = 4.0
    period_ns: int = 5_000_000_000
    now_ns: int = 0
    faults: list[FaultSpec] = field(default_factory=list)

    def advance(self, to_ns: int) -> None:
        """Move on in steps of at most ``STEP_s``."""
        if to_ns < self.now_ns:
            raise ValueError("the past")
        span_s = (to_ns - self.now_ns) / 1e9
        steps = math.ceil(span_s / STEP_s)
        for _ in range(steps):
            for unit in self.units.values():
                unit.step(span_s / steps)
        self.now_ns = to_ns

    def tell(self, unit: str, action: Action, value: float) -> str:
        """Give a command to a unit."""
        return self.units[unit].tell(action, value)

    def read(self, device: str, channels: Sequence[str]) -> Sequence[Reading]:
        """Channels of a unit, or inputs."""
        unit = self.units.get(self.owners.get(device, device))
        if unit is None:
            return [self.inputs[channel] for channel in channels]
        fault = "low level" if isinstance(unit, PlainBath) and unit.low_level else ""
        values = unit.channels()
        return [Reading(channel, values[channel], None, fault) for channel in channels]

    def spectrum(self, device: str) -> Spectrum:
        """A spectrum that tells its own number: point i is i times 1e-4 plus a tenth of the count."""
        done_ns = self.now_ns // self.period_ns * self.period_ns
        if done_ns == 0:
            raise LookupError(device)
        count = done_ns / self.period_ns
        data = tuple(i * 1e-4 + count * 0.1 for i in range(self.points))
        return Spectrum(device, done_ns, self.start_per_cm, self.step_per_cm, data)

    def inject(self, fault: FaultSpec) -> None:
        """Keep the fault; one kind is known."""
        if fault.kind != "known":
            raise ConfigError((Problem("fault-kind", f"no fault is called {fault.kind!r}"),))
        self.faults.append(fault)

    def clear(self, kind: str, target: str) -> None:
        """Forget the fault."""
        self.faults = [fault for fault in self.faults if (fault.kind, fault.target) != (kind, target)]

    def truth(self) -> Mapping[str, float]:
        """Levels of the pumps."""
        return {f"level:{name}": unit.level_mL for name, unit in self.units.items() if isinstance(unit, PlainPump)}
