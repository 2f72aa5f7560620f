"""A recipe walked through before it is run: the sequence itself, along a rig that does what it is told.

The same phases, syringes, fillings and change-overs as in the run decide here, so that times and volumes need no
formulas of their own. What no rig file tells is left out: noise, heat of reaction, pressure of flow. The signal gate
opens as soon as it can. Nothing is simulated but motion (``rigd.logic.ideal_rig``), which takes a fraction of a second.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigd.logic import arbitration, conduct, planning
from rigd.logic.arbitration import Memory
from rigd.logic.conduct import run_states
from rigd.logic.conduct.campaign import PhaseKind, PhaseSpec
from rigd.logic.conduct.layout import Layout, make_layout
from rigd.logic.conduct.state import ConductState
from rigd.logic.conduct.wants import PointResult
from rigd.logic.ideal_rig import IdealRig
from rigd.logic.plan_problems import find_problems
from rigd.logic.planning import PhasePlan, Plan
from rigd.logic.program import SECOND_NS, Program
from rigd.logic.view import Verdict, View
from rigd.model.devices import DeviceStatus, LinkState
from rigd.model.orders import Order, Outcome, Request, Verb
from rigd.model.problems import Problem
from rigd.model.samples import Sample

ANSWER_NS = 50_000_000
"""From an order to the next look at what became of it."""
LONGEST_NS = 14 * 86_400 * SECOND_NS
"""A recipe that is not over after two weeks is endless."""
START_NS = 4 * SECOND_NS
"""When the person who resets and signs is done."""
_PERMIT = Verdict(permit=True)


@dataclass(frozen=True, slots=True)
class Stretch:
    """One phase as it is foreseen: start and length [s], per pump what it delivers [mL], per liquid what is drawn."""

    id: str
    label: str
    kind: PhaseKind
    start_s: float
    duration_s: float
    delivered_mL: Mapping[str, float]
    drawn_mL: Mapping[str, float]
    fills: int
    point: str = ""


@dataclass(frozen=True, slots=True)
class Foresight:
    """The whole run. ``waits_for`` is what it would hold for, "" when it goes through."""

    stretches: tuple[Stretch, ...]
    duration_s: float
    used_mL: Mapping[str, float]
    collected_mL: Mapping[str, float]
    points: tuple[PointResult, ...]
    waits_for: str = ""


def foreseen_plan(program: Program) -> Plan:
    """The plan with the times and volumes of the walk, and what would stop it half-way among its problems."""
    roughly, found = planning.plan(program), foresee(program)
    phases = tuple(map(_phase_plan, roughly.phases, found.stretches))
    layout = make_layout(program)
    collected_mL = sum(point.collected_mL for point in found.points)
    waste_mL = max(0.0, sum(found.used_mL.values()) - collected_mL)
    problems = (*_halted(layout, found), *find_problems(layout, found.used_mL, collected_mL, waste_mL))
    return Plan(
        phases=(*phases, *roughly.phases[len(phases) :]),
        duration_s=found.duration_s,
        used_mL=found.used_mL,
        refills=sum(phase.refills for phase in phases),
        collected_mL=collected_mL,
        waste_mL=waste_mL,
        problems=problems,
    )


def _phase_plan(phase: PhasePlan, found: Stretch) -> PhasePlan:
    return replace(
        phase,
        start_s=found.start_s,
        duration_s=found.duration_s,
        volumes_mL=found.delivered_mL,
        drawn_mL={liquid: mL for liquid, mL in found.drawn_mL.items() if mL > 0.0005},
        refills=found.fills,
    )


def _halted(layout: Layout, found: Foresight) -> tuple[Problem, ...]:
    if not found.waits_for:
        return ()
    label = found.stretches[-1].label if found.stretches else layout.recipe.title
    text = f"{label}: the run would hold and wait for a person: {found.waits_for}"
    return (Problem("would-hold", text, "change the recipe or the rig file so that this cannot happen"),)


def foresee(program: Program) -> Foresight:
    """Walk the recipe. Pure."""
    walk = _Walk(program)
    while not walk.over():
        walk.step()
    return walk.result()


class _Walk:
    """Working space of one walk."""

    def __init__(self, program: Program) -> None:
        self._program = program
        self._rig = IdealRig.at_start(program)
        state = conduct.initial(program, 0)
        self._state: ConductState = replace(state, layout=replace(state.layout, foreseen=True))
        self._memory = Memory()
        self._image: dict[str, Sample] = {}
        self._outcomes: tuple[Outcome, ...] = ()
        self._devices = {d.id: DeviceStatus(d.id, LinkState.ONLINE, 0) for d in program.rig.devices}
        self._period_ns = {tag: program.tags[tag].period_ns or SECOND_NS for tag in state.layout.watch}
        self._poll_ns = min(
            (self._period_ns[tag] for tag in program.carries if tag in self._period_ns), default=SECOND_NS
        )
        self._due_ns = dict.fromkeys(self._period_ns, 0)
        self._marks: list[tuple[PhaseSpec, float, dict[str, float], dict[str, float], int]] = []
        self._asked = 0
        self._now_ns = 0

    def over(self) -> bool:
        """True when the recipe is done, waits for a person, or never ends."""
        ended = run_states.over(self._state.run) or self._state.run == run_states.HELD
        return ended or self._now_ns > LONGEST_NS

    def step(self) -> None:
        """Look, let the sequence decide, carry it out, go on to the next thing that happens."""
        self._rig.advance(self._now_ns)
        self._look()
        view = View(
            self._now_ns, self._image, _PERMIT, self._outcomes, self._requests(), self._devices, frozenset(self._image)
        )
        before = self._state.spec
        done = conduct.advance(self._program, self._state, view)
        self._state = done.state
        if self._state.spec is not before or not self._marks:
            self._mark()
        self._rig.by_hand = dict(self._state.by_hand)
        self._memory, _ = arbitration.note(self._program, self._memory, self._outcomes, (), self._now_ns)
        orders: tuple[Order, ...] = ()
        if done.demand is not None:
            self._memory, orders, _ = arbitration.decide(
                self._program, self._memory, done.demand, self._image, self._now_ns
            )
        self._outcomes = tuple(self._rig.tell(order) for order in orders)
        self._now_ns = self._next_ns(done.wake_ns, bool(orders))

    def _next_ns(self, wake_ns: int, told: bool) -> int:
        now_ns = self._now_ns
        if told:
            return now_ns + ANSWER_NS
        seen_ns = -(-self._rig.next_ns() // self._poll_ns) * self._poll_ns
        if self._rig.drifting():
            seen_ns = min(seen_ns, (now_ns // self._poll_ns + 1) * self._poll_ns)
        return max(min(wake_ns, seen_ns), now_ns + 1)

    def _look(self) -> None:
        """Read what is due."""
        now_ns = self._now_ns
        due = [tag for tag, due_ns in self._due_ns.items() if due_ns <= now_ns]
        if not due:
            return
        for tag in due:
            self._due_ns[tag] = (now_ns // self._period_ns[tag] + 1) * self._period_ns[tag]
        shown = self._rig.values(due, self._program.carries)
        self._image = self._image | {tag: Sample(tag, value, now_ns) for tag, value in shown.items()}

    def _requests(self) -> tuple[Request, ...]:
        """A person who signs everything at once, and starts."""
        asked: list[tuple[Verb, str]] = []
        if any(prompt.status == "open" for prompt in self._state.prompts.values()):
            asked.append((Verb.CONFIRM, "*"))
        if self._state.run == run_states.IDLE and self._now_ns >= START_NS:
            asked += [(Verb.CONFIRM, "*"), (Verb.START, "")]
        return tuple(Request(f"plan-{n}", verb, "plan", self._now_ns, target) for n, (verb, target) in enumerate(asked))

    def _mark(self) -> None:
        delivered = {name: pump.delivered_mL for name, pump in self._rig.pumps.items()}
        fills = sum(pump.fills for pump in self._rig.pumps.values())
        self._marks.append((self._state.spec, self._now_ns / 1e9, delivered, dict(self._rig.drawn_mL), fills))

    def result(self) -> Foresight:
        """What was found."""
        self._mark()
        rows = []
        for (spec, start_s, mL, drawn, fills), (_, end_s, mL_then, drawn_then, fills_then) in zip(
            self._marks[1:-1], self._marks[2:], strict=True
        ):
            rows.append(
                Stretch(
                    spec.id,
                    spec.label,
                    spec.kind,
                    start_s,
                    end_s - start_s,
                    {name: mL_then[name] - mL[name] for name in mL},
                    {liquid: volume - drawn.get(liquid, 0.0) for liquid, volume in drawn_then.items()},
                    fills_then - fills,
                    spec.point.id if spec.point and spec.kind is PhaseKind.POINT else "",
                )
            )
        return Foresight(
            tuple(rows),
            self._now_ns / 1e9,
            dict(self._rig.drawn_mL),
            dict(self._rig.outlet_mL),
            conduct.points(self._state),
            self._state.hold_reason if self._state.run == run_states.HELD else "",
        )
