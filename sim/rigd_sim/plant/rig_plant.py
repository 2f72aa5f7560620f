"""The simulated rig: one object behind the port ``rigd.ports.plant.Plant``.

Time is integer nanoseconds and moves only by ``advance``. Liquid, reaction and heat are carried on in steps of at most
one second, cut where a valve, a syringe or a fault changes something, never by the caller's dt. Pressures are
integrated whenever the caller may look at them, except in calm: when no pressure changes by more than ``CALM_PA`` in a
second and nothing is ordered, they stand still until the next step of the liquid, which then integrates the whole
interval.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from rigd.model.devices import PumpState
from rigd.model.orders import Action
from rigd.model.rig import RigDefinition
from rigd.model.samples import Reading, Spectrum
from rigd.ports.plant import NO_ANSWER, FaultSpec
from rigd_sim.physics.constants import ATMOSPHERE_PA, ML_M3, ML_MIN_M3_S, ZERO_CELSIUS_K
from rigd_sim.plant.ailments import Ailments, FaultEffect
from rigd_sim.plant.bath_unit import BathUnit
from rigd_sim.plant.contents import Contents
from rigd_sim.plant.flows import Flows
from rigd_sim.plant.infrared import InfraredUnit
from rigd_sim.plant.instruments import HEALTHY, Instruments, Sensor
from rigd_sim.plant.layout import SyringeEdges, build_layout
from rigd_sim.plant.levers import BathLever, CellLever, Levers, PumpLever, ValveLever
from rigd_sim.plant.places import make_sensors
from rigd_sim.plant.pump_unit import PumpUnit
from rigd_sim.plant.thermal import Thermal
from rigd_sim.plant.truth import true_state
from rigd_sim.plant.valve_unit import NEVER_NS, ValveUnit

NS = 1_000_000_000
CHEMISTRY_NS = NS
FAR_S = 1e6
SMALL_GAS_M3 = 1e-9
GRAVITY_M_S2 = 9.80665
CALM_PA = 20.0
"""How far a reading may be behind its pressure in calm: 0.2 mbar, a hundredth of what such a sensor's noise is."""

_PUMP, _VALVE, _BATH, _CELL = PumpLever(), ValveLever(), BathLever(), CellLever()


class RigPlant:
    """The simulated rig. ``effects`` are the fault kinds that it understands (``rigd_sim.faults`` has them)."""

    def __init__(self, rig: RigDefinition, seed: int, effects: Mapping[str, FaultEffect] | None = None) -> None:
        self.rig = rig
        self.now_ns = 0
        self.layout = build_layout(rig)
        self.contents = Contents(rig, self.layout)
        self.flows = Flows(self.layout, self.contents, dict(rig.simulation.truth))
        self.pumps = {p.id: PumpUnit(p) for p in self.layout.pumps.values()}
        self.valves = {v.id: ValveUnit(v) for v in rig.valves}
        self.baths = {c.id: BathUnit(c, self.contents.room_K) for c in rig.chillers}
        self.thermal = Thermal(rig, self.contents, self.baths)
        self.infrared = {c.device: InfraredUnit(c, rig.chemistry, seed + n) for n, c in enumerate(rig.cells)}
        self.instruments = Instruments(rig, seed)
        make_sensors(self)
        self.ailments = Ailments(rig, self.layout, effects or {})
        self.levers = Levers()
        self._units = {d.id: d.unit for d in rig.devices}
        self._device_of = {d.unit: d.id for d in rig.devices if d.unit}
        self._restarts: list[str] = []
        self._chemistry_ns = min([CHEMISTRY_NS, *(c.period_ns for c in rig.cells)])
        self._carried_ns = self._solved_ns = self._calm_ns = 0
        self._headspace: dict[str, float] = {}
        self._head = self.contents.fluid().density(self.contents.room_K) * GRAVITY_M_S2 * 1e-3  # Pa per mm
        self.initial = self.contents.totals()
        self._refresh_levers()

    # time ---------------------------------------------------------------------------------------------------------

    def advance(self, to_ns: int) -> None:
        """Move the physics to ``to_ns``; ``ValueError`` for a time in the past."""
        if to_ns < self.now_ns:
            raise ValueError(f"the plant is at {self.now_ns} ns and cannot go back to {to_ns} ns")
        if to_ns < self._calm_ns:
            self.now_ns = to_ns
            return
        while self._solved_ns < to_ns:
            grid = (self._carried_ns // self._chemistry_ns + 1) * self._chemistry_ns
            if to_ns < grid and self._is_calm():
                self._calm_ns = min(grid, self._next_event_ns())
                if to_ns < self._calm_ns:
                    self.now_ns = to_ns
                    return
            self._solve(min(to_ns, grid, self._next_event_ns()))
            self._events()
            if self.now_ns >= grid:
                self._chemistry()

    def _solve(self, to_ns: int) -> None:
        """Integrate the pressures to this time, or by a nanosecond if it is past."""
        step = max(1, to_ns - self._solved_ns)
        self._hydraulics(step / NS)
        self._solved_ns += step
        self.now_ns = max(self.now_ns, self._solved_ns)

    def _is_calm(self) -> bool:
        """True when pressures stand still and will go on to do so until something is ordered or happens."""
        if self.flows.restless > CALM_PA or self.levers.air:
            return False
        levers = self.levers.pumps
        return all(
            not pump.moving or (pump.slack <= 0.0 and levers.get(name, _PUMP).ripple == 0.0)
            for name, pump in self.pumps.items()
        )

    def _next_event_ns(self) -> int:
        """When a pump, a valve or a fault changes by itself."""
        now = self._solved_ns
        nearest = self.ailments.next_change(now / NS) if self.ailments.any() else FAR_S
        for pump in self.pumps.values():
            if pump.filling >= 0 or pump.moving:
                nearest = min(nearest, pump.next_event())
        event = now + math.ceil(nearest * NS) if nearest < FAR_S else NEVER_NS
        for valve in self.valves.values():
            if valve.position != valve.target:
                event = min(event, valve.next_event_ns(now))
        return event

    def _hydraulics(self, h: float) -> None:
        flows, layout = self.flows, self.layout
        flows.source[:] = 0.0
        for name, pump in self.pumps.items():
            if not pump.moving and pump.filling < 0:
                continue
            stroke = pump.stroke(h, self.levers.pumps.get(name, _PUMP))
            edges = layout.syringes[name]
            if stroke.delivered:
                self._push(edges[stroke.active], stroke.delivered, h)
            if stroke.drawn:
                self._draw(pump, edges[stroke.filling], stroke.drawn, h)
        for node, rate in self.levers.air.items():
            flows.add(layout.air_edge[node], rate * h, h)
            flows.source[flows.rank[node]] += rate
        flows.advance(h)

    def _draw(self, pump: PumpUnit, syringe: SyringeEdges, volume: float, h: float) -> None:
        """Draw from the inlet; a leak on the suction side puts air in the place of liquid."""
        share = self.levers.pumps.get(pump.spec.id, _PUMP).air_share
        inlet = self.layout.edges[syringe.draw].a
        self.flows.add(syringe.draw, volume, h)
        self.flows.source[self.flows.rank[inlet]] -= volume * (1.0 - share) / h
        if share > 0.0:
            self.flows.add(self.layout.air_edge[inlet], volume * share, h)

    def _push(self, syringe: SyringeEdges, volume: float, h: float) -> None:
        """Deliver to the outlet, never more than the syringe truly holds."""
        pending = self.contents.pending.item
        held = self.contents.node_volume.item(syringe.node) + pending(syringe.draw) - pending(syringe.deliver)
        volume = min(volume, held)
        self.flows.add(syringe.deliver, volume, h)
        self.flows.source[self.flows.rank[self.layout.edges[syringe.deliver].b]] += volume / h

    def _events(self) -> None:
        """What changes by itself at the end of a step."""
        for name, pump in self.pumps.items():
            if pump.moving or pump.filling >= 0:
                node = self.flows.rank[self.layout.node_index[f"{name}.out"]]
                lever = self.levers.pumps.get(name, _PUMP)
                before = pump.active
                if pump.settle(self.flows.pressure.item(node), lever):
                    self.flows.restless = math.inf
                if pump.active != before:
                    self._carry()
        moving = [v for v in self.valves.values() if v.position != v.target]
        if moving:
            self._carry()
            for valve in moving:
                valve.settle(self.now_ns)
            self._regate()
        if self.ailments.any() and self.ailments.next_change(self.now_ns / NS - 2e-9) <= 3e-9:
            self._carry()
            self._refresh_levers()

    # liquid, heat, reaction ---------------------------------------------------------------------------------------

    def settle(self) -> None:
        """Bring liquid, reactions and heat to the present time, between two regular steps."""
        self._carry()

    def _carry(self) -> None:
        """Carry pending volumes, reactions and heat to the present time."""
        self._calm_ns = 0
        if self._solved_ns < self.now_ns:
            self._solve(self.now_ns)
        dt = (self.now_ns - self._carried_ns) / NS
        if dt <= 0.0:
            return
        self._carried_ns = self.now_ns
        contents = self.contents
        mean_flow = contents.pending / dt
        self.flows.flow[:] = mean_flow
        contents.admit_air()
        contents.disperse(mean_flow)
        contents.advance(dt)
        if contents.gas_share > 0.0:
            self.flows.barrel = self._barrels()
            self.flows.fit_gas(dt)
        self.thermal.advance(dt, mean_flow, self.levers)
        self.flows.expand(dt)
        self.flows.swell(dt)
        contents.age(dt)
        contents.spill(self.levers.capacity)
        self._close_flasks()
        for unit in self.infrared.values():
            row = contents.node_c[self.layout.node_index[unit.cell.id]]
            lever = self.levers.cells.get(unit.cell.id, _CELL)
            share = float(row[contents.gas] * contents.squeeze[self.layout.node_index[unit.cell.id]])
            unit.expose(row, share, dt, self.now_ns, lever)
        self.instruments.advance(dt)

    def _barrels(self) -> list[tuple[int, int]]:
        """The syringe at work of each pump and the node at the pump's outlet."""
        syringes = self.layout.syringes
        return [
            (syringes[name][pump.active].node, self.layout.edges[syringes[name][pump.active].deliver].b)
            for name, pump in self.pumps.items()
        ]

    def _chemistry(self) -> None:
        """A regular step: carry everything on, then refresh what depends on it."""
        self._carry()
        self.flows.update_liquid()
        if self.ailments.active(self.now_ns / NS):
            self._refresh_levers()
        else:
            self.flows.reapply(self.levers)

    def _close_flasks(self) -> None:
        """Headspace gas of closed vessels (isothermal ideal gas): p V stays what it was when they were closed."""
        for name, gas in self._headspace.items():
            i = self.layout.node_index[name]
            room = max(self.layout.vessels[name].capacity_mL * ML_M3 - self.contents.node_volume[i], SMALL_GAS_M3)
            r = self.flows.rank[i]
            self.flows.pressure[r] = gas / room - ATMOSPHERE_PA
            self.flows.rest_compliance[r] = room / (gas / room)

    def _regate(self) -> None:
        """Open and shut the lines at valve ports."""
        for e, edge in enumerate(self.layout.edges[: self.layout.passive]):
            factor = 1.0
            for valve, port in edge.gates:
                unit = self.valves[valve]
                if unit.spec.index(port) != unit.open_port(self.now_ns):
                    factor *= self.levers.valves.get(valve, _VALVE).cross
            self.flows.gate[e] = factor
        self.flows.apply(self.levers)

    def _refresh_levers(self) -> None:
        """Rebuild the settings of all faults in force and let every part see them."""
        before = self.levers.restarted
        self.levers = self.ailments.levers(self.now_ns / NS)
        for unit in self.levers.restarted - before:
            self._restart(unit)
            self._restarts.append(self._device_of[unit])
        self.contents.room_K = self.rig.simulation.ambient_degC + ZERO_CELSIUS_K + self.levers.room_K
        for name, vessel in self.layout.vessels.items():
            self.contents.hide(name, name in self.levers.bottle_empty)
            self._shut(name, vessel.capacity_mL * ML_M3, name in self.levers.closed or not vessel.vented)
        self.contents.poison(self.levers.activity)
        self._regate()

    def _restart(self, unit: str) -> None:
        if unit in self.pumps:
            self.pumps[unit].restart()
        elif unit in self.valves:
            self.valves[unit].restart(self.now_ns)
        elif unit in self.baths:
            self.baths[unit].restart()

    def _shut(self, name: str, capacity: float, closed: bool) -> None:
        """Close or vent a vessel; a vented one stands at the pressure of its height."""
        i = self.layout.node_index[name]
        r = self.flows.rank[i]
        if closed and name not in self._headspace:
            self._headspace[name] = ATMOSPHERE_PA * max(capacity - float(self.contents.node_volume[i]), SMALL_GAS_M3)
            self.flows.ground[r] = 0
        elif not closed:
            self._headspace.pop(name, None)
            self.flows.ground[r] = 1
            self.flows.pressure[r] = (
                self.levers.head_Pa.get(name, 0.0) + self.layout.vessels[name].height_mm * self._head
            )
        self._close_flasks()

    # the port -----------------------------------------------------------------------------------------------------

    def tell(self, unit: str, action: Action, value: float) -> str:
        """Give a command to a unit at the present time; "" or the device's reason to refuse."""
        if unit in self.levers.refusing:
            return "fault"
        if self._device_of.get(unit) in self.levers.silent:
            return NO_ANSWER
        if unit in self.pumps:
            self._carry()
            self.flows.restless = math.inf
            return self.pumps[unit].tell(action, value, self.levers.pumps.get(unit, _PUMP))
        if unit in self.valves and action is Action.MOVE:
            self._carry()
            answer = self.valves[unit].tell(value, self.now_ns, self.levers.valves.get(unit, _VALVE))
            self._regate()
            return answer
        if unit in self.baths:
            return self.baths[unit].tell(action, value)
        return "word"

    def restarts(self) -> Sequence[str]:
        """Devices that lost power and came back since this was last asked."""
        if not self._restarts:
            return ()
        told, self._restarts = self._restarts, []
        return told

    def read(self, device: str, channels: Sequence[str]) -> Sequence[Reading]:
        """What the instruments of this device show now."""
        if device in self.levers.silent:
            return [Reading(c, math.nan, fault=NO_ANSWER) for c in channels]
        unit = self._units.get(device, "")
        if unit in self.pumps:
            if self._solved_ns < self.now_ns:  # a counter is exact, in calm too
                self._solve(self.now_ns)
            return [Reading(c, self._pump_channel(unit, c)) for c in channels]
        if unit in self.valves:
            lever = self.levers.valves.get(unit, _VALVE)
            return [Reading(c, float(self.valves[unit].feedback(self.now_ns, lever))) for c in channels]
        if unit in self.baths:
            return [Reading(c, self._bath_channel(unit, c)) for c in channels]
        if device in self.infrared:
            return [Reading(c, float(self.infrared[device].count)) for c in channels]
        sensors = self.instruments.by_device.get(device, {})
        return [self._sensor(sensors, c) for c in channels]

    def _sensor(self, sensors: Mapping[str, Sensor], channel: str) -> Reading:
        sensor = sensors.get(channel)
        if sensor is None:
            return Reading(channel, math.nan, 0, "OPEN")
        value = self.flows.shown_bar(sensor.slot) if sensor.slot >= 0 else sensor.shown
        lever = self.levers.sensors.get(sensor.tag.id, HEALTHY)
        return sensor.read(value, self.instruments.noise, lever, self.contents.room_K - ZERO_CELSIUS_K)

    def _pump_channel(self, unit: str, channel: str) -> float:
        pump = self.pumps[unit]
        if channel == "flow":
            return pump.rate / ML_MIN_M3_S if pump.moving else 0.0
        if channel == "level":
            return pump.counted[pump.active] / ML_M3
        if channel == "standby":
            return pump.counted[pump.standby()] / ML_M3 if pump.spec.syringes > 1 else 0.0
        if channel == "delivered":
            return pump.delivered / ML_M3
        return float(pump.state) if channel == "state" else math.nan

    def _bath_channel(self, unit: str, channel: str) -> float:
        bath = self.baths[unit]
        lever = self.levers.baths.get(unit, _BATH)
        if channel == "bath":
            noise = 0.01 * self.instruments.noise.normal()
            return round(bath.bath_K - lever.offset_K - ZERO_CELSIUS_K + noise, 2)
        if channel == "setpoint":
            return bath.setpoint_degC
        if channel == "circulating":
            return float(bath.running and (lever.status_lies or not lever.pump_dead))
        return math.nan

    def spectrum(self, device: str) -> Spectrum:
        """The last finished spectrum, without points before the first; ``LookupError`` if the device is no cell."""
        unit = self.infrared[device]
        return unit.spectrum(self.levers.cells.get(unit.cell.id, _CELL))

    def inject(self, fault: FaultSpec) -> None:
        """Add a fault (an onset in the past means now); ``ConfigError`` for an unknown kind or target."""
        self._carry()
        self.ailments.inject(fault, self.now_ns / NS)
        self._refresh_levers()

    def clear(self, kind: str, target: str) -> None:
        """End all faults of this kind on this target now."""
        self._carry()
        self.ailments.clear(kind, target)
        self._refresh_levers()

    def truth(self) -> Mapping[str, float]:
        """True state for checkers; keys as in the port."""
        return true_state(self)

    def stopped(self) -> bool:
        """True when no pump delivers or fills."""
        return all(p.state is not PumpState.DELIVERING and p.filling < 0 for p in self.pumps.values())
