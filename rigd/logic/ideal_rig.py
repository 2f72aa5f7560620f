"""The rig as it should be, in motion only: syringes, valves, bath and closed path, exact between events.

The plan walks the sequence along it (``rigd.logic.foresight``). No physics of flow or reaction: pumps deliver what they
are told, valves take their travel time, the bath follows its declared power, a shut path its declared compliance.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from rigd.logic.program import Program
from rigd.model.devices import VALVE_MOVING, PumpState
from rigd.model.orders import Action, Order, Outcome, Result
from rigd.model.rig import Chiller, Pump, Valve

BATH_J_mL_K = 4.17
"""Heat capacity of water by volume."""
BATH_BAND_K = 2.0
HEATER_LAG_S = 15.0
BATH_STEP_S = 1.0
BATH_LOSS_W_K = 0.7
JACKET_mL = 50.0
"""A bath heats with all its power until it is this near, through a heater of this lag, loses heat to the room and warms
a jacket besides itself (assumptions, no source)."""
_STILL_K_S = 0.001

RELAX_S = 0.5
"""From an open outlet to half of the pressure beyond a regulator's (assumption, no source)."""

_NOTHING_mL = 1e-9


@dataclass(slots=True)
class Syringes:
    """One pump. ``fill_to_mL`` is the end of the filling under way, negative without one."""

    spec: Pump
    level_mL: float = 0.0
    standby_mL: float = 0.0
    delivered_mL: float = 0.0
    rate_mL_min: float = 0.0
    state: PumpState = PumpState.STOPPED
    fill_to_mL: float = -1.0
    fills: int = 0

    def channels(self) -> dict[str, float]:
        """What the pump would report."""
        flow = self.rate_mL_min if self.state is PumpState.DELIVERING else 0.0
        return {
            "flow": flow,
            "level": self.level_mL,
            "standby": self.standby_mL,
            "delivered": self.delivered_mL,
            "state": float(self.state),
        }

    def next_s(self) -> float:
        """Seconds to the next end of a stroke."""
        until = math.inf
        if self.state is PumpState.DELIVERING:
            until = 60.0 * self.level_mL / self.rate_mL_min
        if self.fill_to_mL >= 0:
            held_mL = self.standby_mL if self.spec.syringes > 1 else self.level_mL
            until = min(until, 60.0 * (self.fill_to_mL - held_mL) / self.spec.refill_rate_mL_min)
        return max(until, 0.0)

    def advance(self, seconds: float) -> None:
        """Move on, at most to the next end of a stroke."""
        if self.state is PumpState.DELIVERING:
            moved_mL = min(self.rate_mL_min * seconds / 60.0, self.level_mL)
            self.level_mL -= moved_mL
            self.delivered_mL += moved_mL
        if self.fill_to_mL >= 0:
            self._draw(self.spec.refill_rate_mL_min * seconds / 60.0)
        if self.state is PumpState.DELIVERING and self.level_mL <= _NOTHING_mL and not self._change_over():
            self.level_mL, self.state = 0.0, PumpState.EMPTY

    def tell(self, action: Action, value: float) -> bool:
        """Carry out an order; false when it is refused."""
        if action is Action.STOP:
            self.state, self.rate_mL_min, self.fill_to_mL = PumpState.STOPPED, 0.0, -1.0
            return True
        if action is Action.FILL:
            return self._fill(value)
        if action is Action.SWAP:
            return self.spec.syringes > 1 and self.fill_to_mL < 0 and self._change_over()
        empty = self.level_mL <= _NOTHING_mL
        if self.state is PumpState.REFILLING or (empty and not self._change_over()):
            return False
        self.rate_mL_min, self.state = value, PumpState.DELIVERING
        return True

    def _fill(self, volume_mL: float) -> bool:
        single = self.spec.syringes == 1
        if self.fill_to_mL >= 0 or (single and self.state is PumpState.DELIVERING):
            return False
        if volume_mL > (self.level_mL if single else self.standby_mL):
            self.fill_to_mL = volume_mL
            self.fills += 1
            if single:
                self.state = PumpState.REFILLING
            elif self.state is PumpState.EMPTY:
                self.state = PumpState.STOPPED
        return True

    def _draw(self, volume_mL: float) -> None:
        if self.spec.syringes > 1:
            self.standby_mL = min(self.standby_mL + volume_mL, self.fill_to_mL)
            full = self.standby_mL >= self.fill_to_mL - _NOTHING_mL
        else:
            self.level_mL = min(self.level_mL + volume_mL, self.fill_to_mL)
            full = self.level_mL >= self.fill_to_mL - _NOTHING_mL
        if full:
            self.fill_to_mL = -1.0
            if self.state is PumpState.REFILLING:
                self.state = PumpState.STOPPED

    def _change_over(self) -> bool:
        if self.spec.syringes == 1 or self.standby_mL <= _NOTHING_mL:
            return False
        self.level_mL, self.standby_mL = self.standby_mL, max(self.level_mL, 0.0)
        self.fill_to_mL = -1.0
        return True


@dataclass(slots=True)
class Turning:
    """One driven valve: where it is, where it goes and when it will be there [ns]."""

    spec: Valve
    position: int
    target: int
    there_ns: int = 0


@dataclass(slots=True)
class Bath:
    """One chiller and the jackets on it, as one temperature."""

    spec: Chiller
    degC: float
    setpoint_degC: float
    room_degC: float
    jackets: int = 1
    running: bool = False
    power_W: float = 0.0
    rate_K_s: float = 0.0

    def advance(self, seconds: float) -> None:
        """Follow the set-point with the power there is."""
        left_s = seconds if self.running and not self.settled else 0.0
        heat_J_K = (self.spec.bath_mL + JACKET_mL * self.jackets) * BATH_J_mL_K
        while left_s > 0:
            step_s = min(BATH_STEP_S, left_s)
            share = min(max((self.setpoint_degC - self.degC) / BATH_BAND_K, -1.0), 1.0)
            wanted_W = share * (self.spec.heating_W if share > 0 else self.spec.cooling_W)
            self.power_W += (wanted_W - self.power_W) * (1.0 - math.exp(-step_s / HEATER_LAG_S))
            net_W = self.power_W - BATH_LOSS_W_K * (self.degC - self.room_degC)
            self.rate_K_s = net_W / heat_J_K
            self.degC += self.rate_K_s * step_s
            left_s -= step_s

    @property
    def settled(self) -> bool:
        """True when nothing changes any more."""
        near = abs(self.setpoint_degC - self.degC) < BATH_BAND_K / 4
        return not self.running or (near and abs(self.rate_K_s) < _STILL_K_S)


@dataclass(slots=True)
class IdealRig:
    """Everything that moves, at ``now_ns``; ``drawn_mL`` is what left the vessels, by liquid."""

    program: Program
    pumps: dict[str, Syringes]
    valves: dict[str, Turning]
    baths: dict[str, Bath]
    now_ns: int = 0
    bar: float = 0.0
    by_hand: dict[str, str] = field(default_factory=dict)
    drawn_mL: dict[str, float] = field(default_factory=dict)
    outlet_mL: dict[str, float] = field(default_factory=dict)

    @classmethod
    def at_start(cls, program: Program) -> IdealRig:
        """Empty syringes, valves and baths at rest."""
        rig = program.rig
        room_degC = rig.simulation.ambient_degC
        rests = {valve.id: valve.index(valve.rest) for valve in rig.valves if valve.device}
        return cls(
            program,
            {name: Syringes(pump) for name, pump in program.pumps.items()},
            {name: Turning(program.valves[name], index, index) for name, index in rests.items()},
            {
                name: Bath(chiller, room_degC, room_degC, room_degC, sum(c.jacket == name for c in rig.columns))
                for name, chiller in program.chillers.items()
            },
        )

    def advance(self, to_ns: int) -> None:
        """Move on, from event to event."""
        while self.now_ns < to_ns:
            next_ns = min(to_ns, max(self.next_ns(), self.now_ns + 1))
            self._move((next_ns - self.now_ns) / 1e9)
            self.now_ns = next_ns
            for valve in self.valves.values():
                if valve.position != valve.target and self.now_ns >= valve.there_ns:
                    valve.position = valve.target

    def next_ns(self) -> int:
        """When something ends by itself: a stroke or the travel of a valve."""
        ends_s = min((pump.next_s() for pump in self.pumps.values()), default=math.inf)
        ends_ns = self.now_ns + math.ceil(ends_s * 1e9) if ends_s < 1e9 else 1 << 62
        moving = [valve.there_ns for valve in self.valves.values() if valve.position != valve.target]
        return min([ends_ns, *moving])

    def drifting(self) -> bool:
        """True while a bath or a pressure is on its way, the end of which nobody knows beforehand."""
        return abs(self.bar - self._open_bar()) > 0.05 or not all(bath.settled for bath in self.baths.values())

    def tell(self, order: Order) -> Outcome:
        """Carry out an order at once."""
        done = True
        if order.unit in self.pumps:
            done = self.pumps[order.unit].tell(order.action, order.value)
        elif order.unit in self.valves:
            valve = self.valves[order.unit]
            valve.target = int(order.value)
            valve.there_ns = self.now_ns + int(valve.spec.travel_s * 1e9)
        elif order.action is Action.SET_TEMPERATURE:
            self.baths[order.unit].setpoint_degC = order.value
        else:
            self.baths[order.unit].running = order.value != 0.0
        result = Result.DONE if done else Result.REFUSED
        return Outcome(order.number, order.unit, order.action, result, self.now_ns)

    def values(self, tags: Iterable[str], feedback: Mapping[str, tuple[str, str]]) -> dict[str, float]:
        """What the instruments would show of these tags, those of the process left out that nobody foresees."""
        shown = {}
        for tag in tags:
            unit, channel = feedback.get(tag, ("", ""))
            if unit in self.pumps:
                shown[tag] = self.pumps[unit].channels()[channel]
            elif unit in self.valves:
                valve = self.valves[unit]
                shown[tag] = float(valve.position if valve.position == valve.target else VALVE_MOVING)
            elif self.program.tags[tag].measures == "pressure":
                shown[tag] = self.bar
            elif self.program.tags[tag].measures == "temperature":
                shown[tag] = self._warmth(self.program.tags[tag].lag_s)
        return shown

    def _warmth(self, lag_s: float) -> float:
        """What a sensor of this lag shows of the bath, all temperatures counting as one."""
        for bath in self.baths.values():
            return bath.degC if bath.settled else bath.degC - lag_s * bath.rate_K_s
        return self.program.rig.simulation.ambient_degC

    def _move(self, seconds: float) -> None:
        held = {name: _held_mL(pump) for name, pump in self.pumps.items()}
        before_mL = sum(pump.delivered_mL for pump in self.pumps.values())
        for name, pump in self.pumps.items():
            pump.advance(seconds)
            self._book(name, _held_mL(pump) - held[name])
        for bath in self.baths.values():
            bath.advance(seconds)
        self._press(sum(pump.delivered_mL for pump in self.pumps.values()) - before_mL, seconds)

    def _book(self, pump: str, rise_mL: float) -> None:
        """What a pump drew, from the vessel that its feed valve shows."""
        if rise_mL <= _NOTHING_mL:
            return
        feed = self.program.path.feed(pump)
        valve = self.valves.get(feed.valve)
        position = valve.spec.positions[valve.position] if valve else self.by_hand.get(feed.valve, "")
        line = self.program.supply[pump].get(position)
        if line is not None:
            self.drawn_mL[line.liquid] = self.drawn_mL.get(line.liquid, 0.0) + rise_mL

    def _press(self, delivered_mL: float, seconds: float) -> None:
        """Pressure of a path that is shut; of an open one nothing is foreseen but that it goes."""
        outlet = self.valves.get(self.program.path.outlet_valve)
        position = outlet.spec.positions[outlet.position] if outlet else ""
        vessel = self.program.drain.get(position, "")
        if vessel:
            open_bar = self._open_bar()
            self.bar = open_bar + (self.bar - open_bar) * 0.5 ** (seconds / RELAX_S)
            self.outlet_mL[vessel] = self.outlet_mL.get(vessel, 0.0) + delivered_mL
        else:
            compliance = sum(pump.spec.compliance_mL_bar for pump in self.pumps.values())
            self.bar += delivered_mL / max(compliance, 1e-6)

    def _open_bar(self) -> float:
        """What back-pressure regulators keep in the open path once liquid has come through."""
        kept = sum(regulator.set_bar for regulator in self.program.rig.regulators)
        return kept if any(pump.delivered_mL > 0 for pump in self.pumps.values()) else 0.0


def _held_mL(pump: Syringes) -> float:
    return pump.level_mL + pump.standby_mL + pump.delivered_mL
