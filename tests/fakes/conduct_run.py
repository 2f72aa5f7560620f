"""Drives ``conduct.advance`` against the kinematic rig in virtual time: the smallest possible dry run."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

from fakes.kinematic_rig import KinematicRig

from rigd.logic import conduct
from rigd.logic.program import Program, RunOptions, compile_program
from rigd.logic.view import Verdict, View
from rigd.model.devices import DeviceStatus, LinkState
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request, Stop, Verb
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.model.samples import Sample

SECOND_NS = 1_000_000_000


@dataclass
class ConductRun:
    """A run under way. ``verdict`` is what a test lets protect say."""

    rig: RigDefinition
    recipe: Recipe
    options: RunOptions = field(default_factory=RunOptions)
    seed: int = 1

    def __post_init__(self) -> None:
        self.program: Program = compile_program(self.rig, self.recipe, self.options)
        self.plant = KinematicRig(self.rig, self.seed)
        self.state = conduct.initial(self.program, 0)
        self.verdict = Verdict(permit=True)
        self.samples: dict[str, Sample] = {}
        self.events: list[Event] = []
        self.requests: list[Request] = []
        self.scans = 0
        self._online = {d.id: DeviceStatus(d.id, LinkState.ONLINE, 0) for d in self.rig.devices}
        self._next = {tag.id: tag.period_ns for tag in self.rig.tags}

    def ask(self, verb: Verb, target: str = "", who: str = "tester") -> None:
        """A request for the next scan."""
        self.requests.append(Request(f"r{len(self.events)}-{len(self.requests)}", verb, who, self.plant.now_ns, target))

    def silence(self, tag: str) -> None:
        """This tag is not seen any more."""
        del self.samples[tag]
        self._next[tag] = 1 << 62

    def start(self) -> None:
        """Sign the checklist and start."""
        self.until(lambda run: len(run.samples) == len(run.rig.tags), 20.0)
        self.ask(Verb.CONFIRM, "*")
        self.ask(Verb.START)

    def until(self, condition: Callable[[ConductRun], bool], limit_s: float) -> bool:
        """Scan until a condition holds; False when it did not within the limit."""
        end_ns = self.plant.now_ns + int(limit_s * SECOND_NS)
        while self.plant.now_ns < end_ns:
            self.scan()
            if condition(self):
                return True
        return False

    def scan(self) -> None:
        """Go to the next time at which something happens."""
        wake_ns = max(self.state.due_ns, self.plant.now_ns + 1)
        slow = self.plant.valves[self.plant.path.outlet_valve].position != "shut"
        skip = {tag.id for tag in self.rig.tags if tag.measures == "pressure"} if slow else set()
        to_ns = min([wake_ns, *(t for tag, t in self._next.items() if tag not in skip)])
        self.plant.advance(max(to_ns, self.plant.now_ns + 1))
        now_ns = self.plant.now_ns
        fresh = frozenset(tag for tag, t in self._next.items() if t <= now_ns)
        for tag in fresh:
            self._next[tag] = now_ns + self.program.tags[tag].period_ns
        self.samples |= self.plant.samples(fresh)
        view = View(
            now_ns,
            dict(self.samples),
            self.verdict,
            outcomes=self.plant.outcomes(),
            requests=tuple(self.requests),
            devices=self._online,
            fresh=fresh,
        )
        self.requests = []
        step = conduct.advance(self.program, self.state, view)
        self.state = step.state
        self.events += step.events
        self.scans += 1
        assert step.wake_ns > now_ns, "a wake in the past would spin"
        if step.demand is not None:
            self.plant.obey(step.demand)

    def finish(self, limit_s: float = 40_000.0) -> str:
        """Run to the end; the outcome."""
        self.until(lambda run: conduct.outcome(run.state) != "", limit_s)
        return conduct.outcome(self.state)

    def trip(self, stop: Stop, first_out: str = "TEST") -> None:
        """Let protect stop the rig."""
        self.verdict = Verdict(stop=stop, permit=False, first_out=first_out)
        if stop is Stop.CUT:
            self.plant.stop_all()

    def stop_done(self) -> None:
        """Protect has reached the end state of the stop."""
        self.plant.stop_all()
        self.verdict = replace(self.verdict, stop_done=True)

    def of(self, kind: EventKind, subject: str = "") -> list[Event]:
        """Events of a kind."""
        return [e for e in self.events if e.kind is kind and subject in ("", e.subject)]

    @property
    def now_s(self) -> float:
        """Process seconds."""
        return self.plant.now_ns / SECOND_NS

    def summary(self) -> dict[str, object]:
        """The snapshot's part of conduct."""
        return conduct.summary(self.program, self.state, self.plant.now_ns)
