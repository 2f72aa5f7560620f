"""The core, composed: protect, then conduct. Nothing is decided here.

``scan(program, state, intake, now_ns)`` is pure: the same arguments give the same step on any machine. A live shell
calls the two halves itself and lets the orders of the first leave before it enters the second.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic import arbitration
from rigd.logic import conduct as sequence
from rigd.logic import run_end as ending
from rigd.logic.arbitration import Memory
from rigd.logic.program import Program
from rigd.logic.protect import protection
from rigd.logic.protect.describe_state import shown_state
from rigd.logic.protect.protection import ProtectState
from rigd.logic.protect.timers import NEVER_NS
from rigd.logic.run_end import RunEnd
from rigd.logic.view import View
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Authority, Order, Stop

if TYPE_CHECKING:
    from rigd.logic.conduct import ConductState


@dataclass(frozen=True, slots=True)
class CoreState:
    """Everything that the core remembers between two scans; opaque to the shells.

    ``broken`` is the error that ended conduct, "" while it works.
    """

    protect: ProtectState
    conduct: ConductState
    memory: Memory
    started_ns: int
    now_ns: int
    broken: str = ""


@dataclass(frozen=True, slots=True)
class Step:
    """What one scan (or half of one) decided; ``wake_ns`` is the next time at which something is due."""

    state: CoreState
    orders: tuple[Order, ...]
    events: tuple[Event, ...]
    wake_ns: int


def initial(program: Program, now_ns: int) -> CoreState:
    """The state before the first scan: everything tripped, nothing ordered."""
    return CoreState(protection.initial(program, now_ns), sequence.initial(program, now_ns), Memory(), now_ns, now_ns)


def protect(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """First half: signals, alarms, interlocks, stops. Its orders leave before ``conduct`` is entered."""
    assert now_ns >= state.now_ns, "time runs backwards"
    if state.broken:
        intake = replace(intake, faults=(*intake.faults, ("conduct", state.broken)))
    memory = state.memory
    answers: tuple[Event, ...] = ()
    if intake.outcomes or intake.links:
        memory, answers = arbitration.note(program, memory, intake.outcomes, intake.links, now_ns)
    step = protection.advance(program, state.protect, memory, intake, now_ns)
    orders: tuple[Order, ...] = ()
    given: tuple[Event, ...] = ()
    if step.demand is not None:
        image, again = step.state.signals.samples, step.state.stopping.again
        memory, orders, given = arbitration.decide(program, memory, step.demand, image, now_ns, again)
    after = CoreState(step.state, state.conduct, memory, state.started_ns, now_ns, state.broken)
    return Step(after, orders, (*answers, *step.events, *given), min(step.wake_ns, _retry_ns(memory, now_ns)))


def conduct(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """Second half: the recipe. Never raises: an error inside is a cause of a cut in the next ``protect``."""
    if state.broken:
        return Step(state, (), (), NEVER_NS)
    try:
        return _conduct(program, state, intake, now_ns)
    except Exception as error:  # noqa: BLE001 - whatever the sequence does wrong must end in a stop, not in a crash
        detail = f"{type(error).__name__}: {error}"
        event = Event(EventKind.FAULT, "conduct", now_ns, f"The sequence failed: {detail}.", {"detail": detail})
        return Step(replace(state, broken=detail), (), (event,), now_ns)


def _conduct(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    guarded = state.protect
    signals, verdict = guarded.signals, guarded.verdict
    view = View(now_ns, signals.samples, verdict, intake.outcomes, intake.requests, signals.devices, guarded.fresh)
    step = sequence.advance(program, state.conduct, view)
    memory = state.memory
    orders: tuple[Order, ...] = ()
    given: tuple[Event, ...] = ()
    if step.demand is not None and verdict.permit:
        assert step.demand.authority < Authority.QUENCH, "the sequence never speaks with the authority of a stop"
        memory, orders, given = arbitration.decide(program, memory, step.demand, signals.samples, now_ns)
    assert not orders or verdict.stop <= Stop.HOLD, "a tripped final element never gets an order of the sequence"
    after = CoreState(guarded, step.state, memory, state.started_ns, state.now_ns)
    return Step(after, orders, (*step.events, *given), min(step.wake_ns, _retry_ns(memory, now_ns)))


def _retry_ns(memory: Memory, now_ns: int) -> int:
    return memory.due_ns if memory.due_ns > now_ns else NEVER_NS


def scan(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """Both halves, orders and events in the order in which they were decided."""
    first = protect(program, state, intake, now_ns)
    second = conduct(program, first.state, intake, now_ns)
    wake_ns = min(first.wake_ns, second.wake_ns)
    return Step(second.state, first.orders + second.orders, first.events + second.events, wake_ns)


def snapshot(program: Program, state: CoreState, now_ns: int) -> dict[str, object]:
    """``rigd.ports.door.SNAPSHOT_KEYS`` except ``run``, ``utc`` and ``record``, ready for JSON."""
    shown: dict[str, object] = {"t_s": (now_ns - state.started_ns) / 1e9}
    shown.update(shown_state(program, state.protect, now_ns))
    shown.update(sequence.summary(program, state.conduct, now_ns))
    return shown


def run_end(program: Program, state: CoreState) -> RunEnd | None:
    """How the run ended, once it is over and every pump is confirmed stopped; ``None`` before."""
    outcome = "" if state.broken else sequence.outcome(state.conduct)
    return ending.run_end(program, state.protect, state.memory, outcome, state.broken)
