"""The core on a plant without physics: polls, orders and outcomes in virtual time, everything kept for the test."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from types import SimpleNamespace
from unittest.mock import patch

from fakes.plain_plant import PlainBath, PlainPlant, PlainPump, PlainValve
from fakes.rigs import MS, S

from rigd.logic import scan
from rigd.logic.demand import Demand
from rigd.logic.program import Program
from rigd.logic.view import View
from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Authority, Order, Outcome, Request, Result, Verb
from rigd.model.samples import Quality, QualityCause, Reading, Sample

SIMULATED = DeviceIdentity("bench", "plain", "1", simulated=True)


@dataclass
class StandIn:
    """In the place of conduct: demands what the test says, as long as it may."""

    want: Demand | None = None
    fail: bool = False
    end: str = ""
    views: list[View] = field(default_factory=list)

    def module(self) -> SimpleNamespace:
        """What ``scan`` knows of conduct."""
        return SimpleNamespace(
            initial=lambda program, now_ns: None,
            advance=self._advance,
            summary=lambda program, state, now_ns: {"state": "IDLE", "phase": {}, "campaign": {}, "prompts": []},
            outcome=lambda state: self.end,
        )

    def _advance(self, program: Program, state: None, view: View) -> SimpleNamespace:
        self.views.append(view)
        if self.fail:
            raise RuntimeError("invented failure")
        return SimpleNamespace(state=None, demand=self.want, events=(), wake_ns=1 << 62)


def sequence_demand(**parts: object) -> Demand:
    """A demand of the sequence."""
    return Demand(Authority.SEQUENCE, "test", **parts)  # type: ignore[arg-type]


class CoarsePlant(PlainPlant):
    """The plain plant in one step per call: nothing here needs finer ones, and whole nights pass quickly."""

    def advance(self, to_ns: int) -> None:
        """Move on in one step."""
        if to_ns > self.now_ns:
            for unit in self.units.values():
                unit.step((to_ns - self.now_ns) / 1e9)
        self.now_ns = to_ns


class Rehearsal:
    """Runs the core against a plain plant. ``sensors`` are the values that the sensor device shows."""

    def __init__(self, program: Program, conduct: StandIn | None = None) -> None:
        self.program = program
        self.conduct = conduct or StandIn()
        rig = program.rig
        units: dict[str, PlainPump | PlainValve | PlainBath] = {
            pump.id: PlainPump(pump.syringes, level_mL=0.0, standby_mL=0.0) for pump in rig.pumps
        }
        units |= {valve.id: PlainValve(travel_s=0.4) for valve in rig.valves}
        units |= {chiller.id: PlainBath() for chiller in rig.chillers}
        self.plant = CoarsePlant(units, {device.id: device.unit for device in rig.devices})
        self.sensors = {"PT-1": 1.0, "PT-2": 0.5, "TT-1": 20.0, "TT-2": 20.0}
        self.now_ns = 0
        self.orders: list[Order] = []
        self.events: list[Event] = []
        self.silent: set[str] = set()
        self.deaf: set[str] = set()
        self.failing: set[str] = set()
        self._pending: dict[str, list[object]] = {"outcomes": [], "links": [], "requests": [], "faults": []}
        self._next = {channel.tag: 0 for device in rig.devices for channel in device.channels}
        self._number = 0
        self._given: tuple[Sample, ...] = ()
        self._module = self.conduct.module()
        with patch.object(scan, "sequence", self._module):
            self.state = scan.initial(program, 0)
        for device in rig.devices:
            self.link(device.id, LinkState.ONLINE)

    def pump(self, name: str) -> PlainPump:
        """A pump of the plant."""
        found = self.plant.units[name]
        assert isinstance(found, PlainPump)
        return found

    def link(self, device: str, state: LinkState, **fields: object) -> None:
        """Report a link change with the next scan."""
        self._pending["links"].append(DeviceStatus(device, state, self.now_ns, identity=SIMULATED, **fields))  # type: ignore[arg-type]

    def forget_link(self, device: str) -> None:
        """Do not report this device with the next scan."""
        self._pending["links"] = [status for status in self._pending["links"] if status.device != device]  # type: ignore[attr-defined]

    def link_as(self, device: str, identity: DeviceIdentity) -> None:
        """Report that another device answers."""
        self._pending["links"].append(DeviceStatus(device, LinkState.ONLINE, self.now_ns, identity=identity))

    def give(self, *samples: tuple[str, float, int]) -> None:
        """One scan now with these samples (tag, value, time) and no polls."""
        self._given = tuple(Sample(*sample) for sample in samples)
        self.scan()

    def spike(self, tag: str, *values: float) -> tuple[Sample, ...]:
        """One scan now with several samples of one tag, 1 ms apart."""
        first_ns = self.now_ns - (len(values) - 1) * MS
        samples = tuple((tag, value, first_ns + i * MS) for i, value in enumerate(values))
        self.give(*samples)
        return tuple(Sample(*sample) for sample in samples)

    def fault(self, name: str, detail: str = "") -> None:
        """Report a fault of the shell with the next scan."""
        self._pending["faults"].append((name, detail))

    def ask(self, verb: Verb, target: str = "", who: str = "someone", **args: str | float) -> Event:
        """Put a request and scan; returns the event that answers it."""
        self._number += 1
        self.now_ns += MS
        request = Request(f"r{self._number}", verb, who, self.now_ns, target, args)
        self._pending["requests"].append(request)
        before = len(self.events)
        self.scan()
        answers = [event for event in self.events[before:] if event.kind is EventKind.REQUEST]
        assert len(answers) == 1
        return answers[0]

    def ready(self) -> None:
        """Two seconds of polls, then a reset of everything."""
        self.run(2.0)
        answer = self.ask(Verb.RESET, "*")
        assert answer.fields["result"] == "accepted", answer.text

    def scan(self) -> scan.Step:
        """One scan now, with the polls that are due."""
        self.plant.advance(self.now_ns)
        pending, self._pending = self._pending, {"outcomes": [], "links": [], "requests": [], "faults": []}
        samples, self._given = self._given or self._polls(), ()
        intake = Intake(samples=samples, **{name: tuple(found) for name, found in pending.items()})  # type: ignore[arg-type]
        with patch.object(scan, "sequence", self._module):
            step = scan.scan(self.program, self.state, intake, self.now_ns)
        self.state = step.state
        self.orders += step.orders
        self.events += step.events
        for order in step.orders:
            self._pending["outcomes"].append(self._carry_out(order))
        return step

    def run(self, seconds: float, until: Callable[[], bool] | None = None) -> None:
        """Scan at every full 100 ms, and whenever the core asks to be woken."""
        end_ns = self.now_ns + round(seconds * S)
        while self.now_ns < end_ns and not (until is not None and until()):
            step = self.scan()
            tick_ns = (self.now_ns // (100 * MS) + 1) * 100 * MS
            self.now_ns = min(tick_ns, max(step.wake_ns, self.now_ns + MS), end_ns)

    def end(self) -> scan.RunEnd | None:
        """How the run ended, if it did."""
        with patch.object(scan, "sequence", self._module):
            return scan.run_end(self.program, self.state)

    def snapshot(self) -> dict[str, object]:
        """What a screen would show."""
        with patch.object(scan, "sequence", self._module):
            return scan.snapshot(self.program, self.state, self.now_ns)

    def told(self, unit: str) -> list[tuple[str, float]]:
        """All orders to a unit, as (action, value)."""
        return [(str(order.action), order.value) for order in self.orders if order.unit == unit]

    def happened(self, kind: EventKind) -> list[Event]:
        """All events of a kind."""
        return [event for event in self.events if event.kind is kind]

    def _carry_out(self, order: Order) -> Outcome:
        if order.unit in self.deaf:
            return Outcome(order.number, order.unit, order.action, Result.DONE, self.now_ns)
        if order.unit in self.failing:
            return Outcome(order.number, order.unit, order.action, Result.FAILED, self.now_ns, "no reply")
        refusal = self.plant.tell(order.unit, order.action, order.value)
        result = Result.REFUSED if refusal else Result.DONE
        return Outcome(order.number, order.unit, order.action, result, self.now_ns, refusal)

    def _polls(self) -> tuple[Sample, ...]:
        samples = []
        self.plant.inputs = {name: Reading(name, value) for name, value in self.sensors.items()}
        for device in self.program.rig.devices:
            due = [c for c in device.channels if self._next[c.tag] <= self.now_ns and c.tag not in self.silent]
            readings = self.plant.read(device.id, [channel.channel for channel in due])
            for channel, reading in zip(due, readings, strict=True):
                while self._next[channel.tag] <= self.now_ns:
                    self._next[channel.tag] += channel.period_ns
                samples.append(Sample(channel.tag, reading.value, self.now_ns))
        return tuple(samples)


def bad(tag: str, t_ns: int, value: float = 0.0) -> Sample:
    """A sample that the driver says is wrong."""
    return Sample(tag, value, t_ns, Quality.BAD, QualityCause.SENSOR_FAULT)
