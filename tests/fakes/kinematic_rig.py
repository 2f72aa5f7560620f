"""A rig that only moves: pumps with levels, valves with travel, plug flow of parcels, a bath that relaxes, one signal.

No pressure drop, no reaction, no mixing except in syringes. It knows which liquid is where, so a test can ask what went
into the flask. Exact between two calls of ``advance`` (piecewise constant flows).
"""

from __future__ import annotations

import math
import random
from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass, field

from rigd.logic.demand import Demand
from rigd.logic.flow_path import FlowPath, flow_path
from rigd.model.devices import VALVE_MOVING, PumpState
from rigd.model.orders import Action, Outcome, Result
from rigd.model.rig import LiquidRole, Pump, RigDefinition, Tag
from rigd.model.samples import Sample

Mix = tuple[tuple[str, float], ...]
"""Fractions by liquid."""

TINY_mL = 1e-9


@dataclass(frozen=True, slots=True)
class Parcel:
    """A plug of liquid. ``flows`` are those at which it entered the trunk, () before."""

    volume_mL: float
    mix: Mix
    flows: tuple[tuple[str, float], ...] = ()


@dataclass
class Pipe:
    """Plug flow through a fixed volume."""

    parcels: deque[Parcel]

    @classmethod
    def full_of(cls, volume_mL: float, liquid: str) -> Pipe:
        return cls(deque([Parcel(volume_mL, ((liquid, 1.0),))] if volume_mL > 0 else []))

    def push(self, incoming: Iterable[Parcel]) -> list[Parcel]:
        """Put parcels in at one end, take the same volume out at the other."""
        out: list[Parcel] = []
        for parcel in incoming:
            self._append(parcel)
            out += self._take(parcel.volume_mL)
        return out

    def _append(self, parcel: Parcel) -> None:
        if self.parcels and (self.parcels[-1].mix, self.parcels[-1].flows) == (parcel.mix, parcel.flows):
            last = self.parcels.pop()
            parcel = Parcel(last.volume_mL + parcel.volume_mL, parcel.mix, parcel.flows)
        self.parcels.append(parcel)

    def _take(self, volume_mL: float) -> list[Parcel]:
        out = []
        while volume_mL > TINY_mL and self.parcels:
            first = self.parcels.popleft()
            if first.volume_mL > volume_mL + TINY_mL:
                self.parcels.appendleft(Parcel(first.volume_mL - volume_mL, first.mix, first.flows))
                first = Parcel(volume_mL, first.mix, first.flows)
            out.append(first)
            volume_mL -= first.volume_mL
        return out

    def at(self, from_end_mL: float) -> Parcel | None:
        """The parcel this far before the outlet."""
        passed = 0.0
        for parcel in self.parcels:
            passed += parcel.volume_mL
            if passed > from_end_mL:
                return parcel
        return None


@dataclass
class Syringe:
    """Ideally mixed content; ``dead_mL`` never leaves."""

    dead_mL: float
    content: dict[str, float] = field(default_factory=dict)

    @property
    def level_mL(self) -> float:
        return max(0.0, sum(self.content.values()) - self.dead_mL)

    @property
    def mix(self) -> Mix:
        total = sum(self.content.values())
        return tuple(sorted((liquid, round(mL / total, 9)) for liquid, mL in self.content.items() if mL > 0))

    def give(self, volume_mL: float) -> Parcel:
        mix, total = self.mix, sum(self.content.values())
        self.content = {liquid: mL * (1 - volume_mL / total) for liquid, mL in self.content.items()}
        return Parcel(volume_mL, mix)

    def take(self, parcels: list[Parcel]) -> None:
        for parcel in parcels:
            for liquid, fraction in parcel.mix:
                self.content[liquid] = self.content.get(liquid, 0.0) + fraction * parcel.volume_mL


@dataclass
class FakePump:
    """One or two syringes, as the manual of the invented pump says."""

    spec: Pump
    syringes: list[Syringe]
    outlet: Pipe
    inlet: Pipe
    active: int = 0
    state: PumpState = PumpState.STOPPED
    rate: float = 0.0
    fill_to: float = 0.0
    delivered_mL: float = 0.0

    @property
    def now(self) -> Syringe:
        return self.syringes[self.active]

    @property
    def filling(self) -> Syringe:
        return self.syringes[(self.active + 1) % len(self.syringes)]

    def tell(self, action: Action, value: float) -> str:
        if action is Action.STOP:
            self.state, self.rate, self.fill_to = PumpState.STOPPED, 0.0, 0.0
            return ""
        if action is Action.FILL:
            if self.fill_to or (len(self.syringes) == 1 and self.state is PumpState.DELIVERING):
                return "state"
            if value > self.spec.stroke_mL + 1e-9:
                return "value"
            self.fill_to = value
            if len(self.syringes) == 1:
                self.state = PumpState.REFILLING
            elif self.state is PumpState.EMPTY:
                self.state = PumpState.STOPPED
            return ""
        if action is Action.SWAP:
            return "" if not self.fill_to and self._change_over() else "state"
        if not self.spec.rate_min_mL_min <= value <= self.spec.rate_max_mL_min:
            return "value"
        if self.state is PumpState.REFILLING or (self.now.level_mL <= TINY_mL and not self._change_over()):
            return "state"
        self.state, self.rate = PumpState.DELIVERING, value
        return ""

    def _change_over(self) -> bool:
        if len(self.syringes) == 1 or self.filling.level_mL <= TINY_mL:
            return False
        self.active, self.fill_to = 1 - self.active, 0.0
        return True

    def step(self, dt_s: float, draw: Pipe) -> list[Parcel]:
        """Move for ``dt_s``; returns what comes out at the end of the outlet line."""
        self._draw(dt_s, draw)
        out: list[Parcel] = []
        left_s = dt_s
        while self.state is PumpState.DELIVERING and left_s > 1e-12:
            volume = min(self.rate * left_s / 60, self.now.level_mL)
            if volume > TINY_mL:
                out += self.outlet.push([self.now.give(volume)])
                self.delivered_mL += volume
            left_s -= 60 * volume / self.rate
            if self.now.level_mL <= TINY_mL and not self._change_over():
                self.state = PumpState.EMPTY
        return out

    def _draw(self, dt_s: float, draw: Pipe) -> None:
        if not self.fill_to:
            return
        volume = min(self.spec.refill_rate_mL_min * dt_s / 60, self.fill_to - self.filling.level_mL)
        if volume > TINY_mL:
            supply = draw.push([Parcel(volume, draw_liquid(draw))])
            self.filling.take(self.inlet.push(supply))
        if self.filling.level_mL >= self.fill_to - 1e-7:
            self.fill_to = 0.0
            if self.state is PumpState.REFILLING:
                self.state = PumpState.STOPPED


def draw_liquid(pipe: Pipe) -> Mix:
    """What the bottle at the far end of a supply line holds."""
    return pipe.bottle  # type: ignore[attr-defined, no-any-return]


@dataclass
class FakeValve:
    """Index of the position; moving for its travel time."""

    positions: tuple[str, ...]
    travel_s: float
    target: int = 0
    left_s: float = 0.0

    def value(self) -> float:
        return float(VALVE_MOVING) if self.left_s > 0 else float(self.target)

    @property
    def position(self) -> str:
        return self.positions[self.target]


class KinematicRig:
    """The whole rig. ``flask`` and ``waste`` keep every parcel that went there."""

    def __init__(self, rig: RigDefinition, seed: int = 1) -> None:
        self.rig, self.path = rig, flow_path(rig)
        self.now_ns = 0
        self.reagents = {liquid.id for liquid in rig.liquids if liquid.role is LiquidRole.REAGENT}
        self.random = random.Random(seed)
        self.pumps = {pump.id: self._pump(pump, self.path) for pump in rig.pumps}
        self.supplies = {
            (line.pump, line.position): self._supply(line.volume_mL, line.liquid) for line in self.path.supply_lines
        }
        self.valves = {valve.id: FakeValve(valve.positions, valve.travel_s) for valve in rig.valves}
        self.sections = [Pipe.full_of(section.volume_mL, "air") for section in self.path.sections]
        self.flask: list[Parcel] = []
        self.waste: list[Parcel] = []
        self.drawn: dict[str, float] = {}
        self.bath_degC = self.set_degC = 22.0
        self.circulating = False
        self.heat_K_s = 0.08
        self.bath_stuck = False
        self.pressure_bar = 0.0
        self.leak_bar_s = 0.0
        self.compliance_mL_bar = 0.03
        self.signal = 0.0
        self.commands: list[tuple[int, str, Action, float]] = []
        self.reagent_at_switchover_s: dict[str, float] = {}
        self.ran_empty: list[tuple[int, str]] = []
        self._told: dict[tuple[str, str], float | str] = {}
        self._wait: list[Outcome] = []
        self._number = 0

    def _pump(self, pump: Pump, path: FlowPath) -> FakePump:
        feed = path.feed(pump.id)
        syringes = [Syringe(pump.dead_mL, {"air": pump.dead_mL}) for _ in range(pump.syringes)]
        return FakePump(pump, syringes, Pipe.full_of(feed.outlet_mL, "air"), Pipe.full_of(feed.inlet_mL, "air"))

    def _supply(self, volume_mL: float, liquid: str) -> Pipe:
        pipe = Pipe.full_of(volume_mL, "air")
        pipe.bottle = ((liquid, 1.0),)  # type: ignore[attr-defined]
        return pipe

    # ---- time

    def advance(self, to_ns: int) -> None:
        """Move to a later time in steps of at most a second; the arrival of a valve ends a step."""
        while self.now_ns < to_ns:
            arrivals = [math.ceil(valve.left_s * 1e9) for valve in self.valves.values() if valve.left_s > 0]
            step_ns = min([to_ns - self.now_ns, 1_000_000_000, *arrivals])
            self._step(step_ns / 1e9)
            self.now_ns += step_ns

    def _step(self, dt_s: float) -> None:
        arriving = {name: self._run(name, pump, dt_s) for name, pump in self.pumps.items()}
        running = {name: pump.rate for name, pump in self.pumps.items() if pump.state is PumpState.DELIVERING}
        flows = tuple(sorted(running.items()))
        shut = self.valves[self.path.outlet_valve].position == "shut"
        self._pressure(dt_s, shut, sum(p.volume_mL for row in arriving.values() for p in row))
        if not shut:
            self._through(arriving, flows)
        self._heat(dt_s)
        self._signal(dt_s)
        for valve in self.valves.values():
            valve.left_s = valve.left_s - dt_s if valve.left_s > dt_s + 1e-9 else 0.0

    def _run(self, name: str, pump: FakePump, dt_s: float) -> list[Parcel]:
        valve = self.path.feed(name).valve
        turn = self.valves.get(valve)
        assert not (pump.fill_to and turn and turn.left_s > 0), f"{name} draws while {valve} moves"
        position = turn.position if turn else ""
        pipe = self.supplies[(name, position)]
        before = sum(s.level_mL for s in pump.syringes) + pump.delivered_mL
        moving = pump.state is PumpState.DELIVERING
        out = pump.step(dt_s, pipe)
        if moving and pump.state is PumpState.EMPTY:
            self.ran_empty.append((self.now_ns, name))
        self._note_front(name, pump.rate, out)
        drawn = sum(s.level_mL for s in pump.syringes) + pump.delivered_mL - before
        liquid = draw_liquid(pipe)[0][0]
        self.drawn[liquid] = self.drawn.get(liquid, 0.0) + max(drawn, 0.0)
        return out

    def _note_front(self, name: str, rate: float, out: list[Parcel]) -> None:
        """When nearly pure reagent first came out of a pump's line."""
        passed_mL = 0.0
        for parcel in out:
            pure = self.reagent(parcel) > 0.985
            if pure and name not in self.reagent_at_switchover_s:
                self.reagent_at_switchover_s[name] = self.now_ns / 1e9 + 60 * passed_mL / rate
            passed_mL += parcel.volume_mL

    def _through(self, arriving: dict[str, list[Parcel]], flows: tuple[tuple[str, float], ...]) -> None:
        """Join the streams section by section, then out through the outlet valve."""
        stream: list[Parcel] = []
        joined: tuple[str, ...] = ()
        for pipe, section in zip(self.sections, self.path.sections, strict=True):
            new = [arriving[pump] for pump in section.pumps if pump not in joined]
            stream = pipe.push(_merged([stream, *new], flows))
            joined = section.pumps
        outlet = self.valves[self.path.outlet_valve]
        (self.flask if outlet.position == "collect" and outlet.left_s == 0 else self.waste).extend(stream)

    def _pressure(self, dt_s: float, shut: bool, volume_mL: float) -> None:
        if shut:
            self.pressure_bar += volume_mL / self.compliance_mL_bar - self.leak_bar_s * dt_s
            self.pressure_bar = max(0.0, self.pressure_bar)
        else:
            self.pressure_bar = 0.0

    def _heat(self, dt_s: float) -> None:
        if not self.circulating or self.bath_stuck:
            return
        gap = self.set_degC - self.bath_degC
        self.bath_degC += math.copysign(min(abs(gap), self.heat_K_s * dt_s), gap)

    def _signal(self, dt_s: float) -> None:
        total = sum(pump.rate for pump in self.pumps.values() if pump.state is PumpState.DELIVERING)
        if total <= 0:
            return
        seen = self.sections[-1].at(self.path.trunk_mL - self.path.past_part_mL(self.rig.cells[0].id))
        wet = self.reagent(seen) if seen else 0.0
        aim = (1 - math.exp(-0.6 / total)) * wet
        lag_s = 0.3 * self.path.residence_s(dict.fromkeys(self.pumps, total / len(self.pumps)))
        self.signal += (aim - self.signal) * (1 - math.exp(-dt_s / lag_s))

    def reagent(self, parcel: Parcel) -> float:
        """The part of a parcel that is reagent of any kind."""
        return sum(share for liquid, share in parcel.mix if liquid in self.reagents)

    # ---- samples and orders

    def samples(self, fresh: frozenset[str]) -> dict[str, Sample]:
        """Samples of these tags now."""
        values = self._values()
        return {tag: Sample(tag, values[tag], self.now_ns) for tag in fresh}

    def _values(self) -> dict[str, float]:
        values = self._feedback()
        for tag in self.rig.tags:
            if tag.id not in values:
                values[tag.id] = self._reading(tag)
        return values

    def _reading(self, tag: Tag) -> float:
        """What a sensor shows, by what it measures."""
        noise = self.random.gauss(0.0, 1.0)
        if tag.measures == "pressure":
            return self.pressure_bar + 0.003 * noise
        if tag.measures == "temperature":
            return self.bath_degC - (0.2 if tag.at.endswith(".middle") else 0.0) + 0.02 * noise
        return self.signal + 0.002 * noise

    def _feedback(self) -> dict[str, float]:
        values: dict[str, float] = {}
        for chiller in self.rig.chillers:
            shown = {"bath": self.bath_degC, "setpoint": self.set_degC, "circulating": float(self.circulating)}
            values |= {f"{chiller.id}.{key}": value for key, value in shown.items()}
        for name, pump in self.pumps.items():
            flow = pump.rate if pump.state is PumpState.DELIVERING else 0.0
            standby = pump.filling.level_mL if len(pump.syringes) > 1 else 0.0
            channels = {"flow": flow, "level": pump.now.level_mL, "standby": standby, "delivered": pump.delivered_mL}
            values |= {f"{name}.{key}": round(value, 4) for key, value in channels.items()}
            values[f"{name}.state"] = float(pump.state)
        values |= {f"{name}.position": valve.value() for name, valve in self.valves.items()}
        return values

    def obey(self, demand: Demand) -> None:
        """A small arbitration: what differs from what was told is ordered; stops, valves, baths, fills, deliveries."""
        for name, want in demand.pumps.items():
            if want.flow_mL_min <= 0.0:
                self._tell(name, "rate", Action.STOP, 0.0)
        for name, position in demand.valves.items():
            self._tell(name, "move", Action.MOVE, float(self.valves[name].positions.index(position)))
        for name, bath in demand.baths.items():
            self._tell(name, "set", Action.SET_TEMPERATURE, bath.temperature_degC)
            self._tell(name, "run", Action.CIRCULATE, float(bath.circulate))
        for name, want in demand.pumps.items():
            valve = self.valves.get(self.path.feed(name).valve)
            arrived = valve is None or valve.left_s == 0
            if want.once and (want.once.action is not Action.FILL or arrived):
                self._tell(name, "once", want.once.action, want.once.value, want.once.ticket)
            if want.flow_mL_min > 0:
                self._tell(name, "rate", Action.DELIVER, want.flow_mL_min)

    def _tell(self, unit: str, aspect: str, action: Action, value: float, ticket: str = "") -> None:
        key: float | str = ticket or (value if action is not Action.STOP else -1.0)
        if self._told.get((unit, aspect)) == key:
            return
        if action is Action.DELIVER and self.valves[self.path.outlet_valve].left_s > 0 and not self.pumps[unit].rate:
            return
        self._told[(unit, aspect)] = key
        refusal = self._carry_out(unit, action, value)
        self._number += 1
        self.commands.append((self.now_ns, unit, action, value))
        result = Result.REFUSED if refusal else Result.DONE
        self._wait.append(Outcome(self._number, unit, action, result, self.now_ns, refusal))
        if refusal and action is Action.DELIVER:
            del self._told[(unit, aspect)]

    def _carry_out(self, unit: str, action: Action, value: float) -> str:
        if unit in self.pumps:
            return self.pumps[unit].tell(action, value)
        if action is Action.MOVE:
            valve = self.valves[unit]
            valve.left_s = valve.travel_s if valve.target != int(value) else 0.0
            valve.target = int(value)
        elif action is Action.SET_TEMPERATURE:
            self.set_degC = value
        else:
            self.circulating = value > 0
        return ""

    def outcomes(self) -> tuple[Outcome, ...]:
        """Answers since the last call."""
        found, self._wait = tuple(self._wait), []
        return found

    def stop_all(self) -> None:
        """What protect does in a cut."""
        for name, pump in self.pumps.items():
            pump.tell(Action.STOP, 0.0)
            self._told[(name, "rate")] = -1.0


def _merged(streams: list[list[Parcel]], flows: tuple[tuple[str, float], ...]) -> list[Parcel]:
    """Streams that ran side by side for the same time, joined slice by slice."""
    rows = [row for row in streams if row]
    totals = [sum(p.volume_mL for p in row) for row in rows]
    if not rows:
        return []
    cuts = sorted({round(cut, 12) for row, total in zip(rows, totals, strict=True) for cut in _cuts(row, total)})
    out, last = [], 0.0
    for cut in cuts:
        mix: dict[str, float] = {}
        volume = 0.0
        for row, total in zip(rows, totals, strict=True):
            part = total * (cut - last)
            volume += part
            for liquid, share in _at(row, total, (cut + last) / 2).mix:
                mix[liquid] = mix.get(liquid, 0.0) + share * part
        if volume > TINY_mL:
            out.append(Parcel(volume, tuple(sorted((k, round(v / volume, 9)) for k, v in mix.items())), flows))
        last = cut
    return out


def _cuts(row: list[Parcel], total: float) -> list[float]:
    passed, cuts = 0.0, []
    for parcel in row[:-1]:
        passed += parcel.volume_mL
        cuts.append(passed / total)
    return [*cuts, 1.0]


def _at(row: list[Parcel], total: float, where: float) -> Parcel:
    passed = 0.0
    for parcel in row:
        passed += parcel.volume_mL / total
        if where < passed:
            return parcel
    return row[-1]
