"""One scan of protect, composed: signals, conditions, interlocks, alarms, requests, stops. Nothing is decided here.

A tag with several new samples is judged one sample after the other, so that a spike between two scans is seen.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.arbitration import Aspect, Memory
from rigd.logic.demand import Demand
from rigd.logic.early import watch as early_rules
from rigd.logic.early.watch import EarlyState
from rigd.logic.protect import alarms, bypass, conditions, faults, interlocks, ledger, reaction, signals, stops
from rigd.logic.protect.alarm_core import AlarmEvent
from rigd.logic.protect.alarm_overlay import FlagEvent
from rigd.logic.protect.alarms import Alarms, Wish
from rigd.logic.protect.bypass import duration_s
from rigd.logic.protect.conditions import Conditions, Judge, Told
from rigd.logic.protect.describe import Words
from rigd.logic.protect.faults import Faults
from rigd.logic.protect.flush import Scene
from rigd.logic.protect.interlocks import Interlocks
from rigd.logic.protect.latch import LatchEvent, LatchState
from rigd.logic.protect.ledger import Ledger
from rigd.logic.protect.reaction import Timed
from rigd.logic.protect.signals import Signals
from rigd.logic.protect.stops import Stopping
from rigd.logic.protect.timers import NEVER_NS
from rigd.logic.view import Verdict
from rigd.model.devices import DeviceStatus, PumpState
from rigd.model.events import Event
from rigd.model.intake import Intake
from rigd.model.orders import Action, Request, Result, Stop, Verb
from rigd.model.protection import ConditionKind
from rigd.model.samples import Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

HIDING = {
    Verb.SHELVE: (FlagEvent.SHELVE, "shelved; it counts again by itself when the time is over"),
    Verb.UNSHELVE: (FlagEvent.UNSHELVE, "no longer shelved"),
    Verb.REMOVE: (FlagEvent.REMOVE, "out of service until it is returned"),
    Verb.RETURN: (FlagEvent.RETURN, "in service again"),
}
"""What a person asks of the flags of an alarm, and the answer when it is granted."""

PROTECT_VERBS = frozenset({Verb.STOP, Verb.CUT, Verb.RESET, Verb.ACKNOWLEDGE, Verb.BYPASS, Verb.END_BYPASS, *HIDING})

UNANSWERED_NS = 2_000_000_000
"""An order whose answer is still out is taken to reach its device within this time."""

SETTLE_NS = {"position": 0, "setpoint": 10_000_000_000, "flow": 2_000_000_000}
"""Time for a feedback to follow an order, besides the travel time of a valve."""


_STARTING = Verdict(stop=Stop.CUT)


@dataclass(frozen=True, slots=True)
class ProtectState:
    """Everything that protect remembers."""

    signals: Signals
    conditions: Conditions
    faults: Faults
    interlocks: Interlocks
    alarms: Alarms
    ledger: Ledger
    stopping: Stopping
    early: EarlyState
    timed: Timed | None = None
    verdict: Verdict = _STARTING
    fresh: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class ProtectStep:
    """What protect decided in one scan; ``demand`` is ``None`` while nothing is stopped."""

    state: ProtectState
    demand: Demand | None
    events: tuple[Event, ...]
    wake_ns: int


def initial(program: Program, now_ns: int) -> ProtectState:
    """Nothing seen, everything tripped, the end state of a cut demanded."""
    return ProtectState(
        signals.initial(now_ns),
        conditions.initial(program.watches),
        faults.initial(program, now_ns),
        interlocks.initial(program, now_ns),
        alarms.initial(program),
        ledger.initial(program),
        stops.initial(program, now_ns),
        early_rules.initial(program.early, now_ns),
    )


def advance(program: Program, state: ProtectState, memory: Memory, intake: Intake, now_ns: int) -> ProtectStep:
    """One scan. ``memory`` is what every unit was told."""
    scan = _Scan(program, state, memory, now_ns)
    scan.hear(intake)
    for number, batch in enumerate(_batches(intake.samples)):
        scan.see(batch, intake.links if number == 0 else ())
    scan.answer(intake.requests)
    return scan.finish()


def _batches(samples: Sequence[Sample]) -> Iterator[Sequence[Sample]]:
    """Cut samples so that no tag comes twice in a batch; almost always there is one batch."""
    if len({sample.tag for sample in samples}) == len(samples):
        yield samples
        return
    batch: dict[str, Sample] = {}
    for sample in samples:
        if sample.tag in batch:
            yield tuple(batch.values())
            batch = {}
        batch[sample.tag] = sample
    yield tuple(batch.values())


class _Scan:
    """Working space of one scan: each part of the state is replaced as it is decided."""

    def __init__(self, program: Program, state: ProtectState, memory: Memory, now_ns: int) -> None:
        self._program = program
        self._memory = memory
        self._now_ns = now_ns
        self._before = state
        self._signals = state.signals
        self._conditions = state.conditions
        self._faults = state.faults
        self._interlocks = state.interlocks
        self._alarms = state.alarms
        self._ledger = state.ledger
        self._early = state.early
        self._gone: tuple[faults.Key, ...] = ()
        self._fresh: set[str] = set()
        self._urgent = False
        self._trips: list[tuple[Words, interlocks.Change]] = []
        self._events: list[Event] = []

    def hear(self, intake: Intake) -> None:
        """Take faults of the shell and requests to stop, and let old ones lapse."""
        now_ns = self._now_ns
        self._faults, self._gone = faults.lapse(self._faults, now_ns)
        for name, detail in intake.faults:
            if (ConditionKind.FAULT, name) not in self._before.faults.standing:
                self._events.append(self._words().fault(name, detail))
        hold_ns = max(faults.HOLD_NS, self._program.options.stale_floor_ns)
        own = faults.of_options(self._program, self._signals.started_ns, now_ns)
        self._faults = faults.report(self._faults, (*intake.faults, *own), now_ns + hold_ns)
        for request in intake.requests:
            if request.verb in (Verb.STOP, Verb.CUT):
                name = "STOP-REQUEST" if request.verb is Verb.STOP else "CUT-REQUEST"
                asked = f"asked for by {request.who or 'somebody'}"
                self._faults = faults.report(self._faults, [(name, asked)], now_ns + 1)
        if intake.links:
            self._faults = faults.power(self._program, self._faults, self._signals, intake.links, now_ns)

    def see(self, batch: Sequence[Sample], statuses: Sequence[DeviceStatus]) -> None:
        """Judge new samples and links, then everything that looks at them."""
        program, now_ns = self._program, self._now_ns
        self._signals, changed = signals.take(program, self._signals, batch, now_ns)
        self._fresh.update(changed)
        self._note_response((), reaction.late(program.budgets, batch, now_ns))
        if statuses:
            self._signals, lost = signals.link(program, self._signals, statuses)
            changed.update(lost)
        self._signals, aged = signals.grow_old(program, self._signals, now_ns)
        changed.update(aged)
        self._ledger, volumes = ledger.update(
            program, self._ledger, self._memory, self._signals.samples, changed, now_ns
        )
        rising = not self._ledger.outlet or self._early.rise.points
        if now_ns >= self._early.due_ns or (rising and program.early.stiff in changed):
            known_mL_bar = self._early.compliance_mL_bar
            self._early, learned = early_rules.update(
                program, self._early, self._signals, self._ledger, changed, volumes, now_ns
            )
            self._events += learned
            if (found_mL_bar := self._early.compliance_mL_bar) != known_mL_bar:
                self._note_response(*reaction.with_compliance(program.rig, program.recipe, found_mL_bar, now_ns))
        if volumes:
            self._signals = replace(self._signals, samples={**self._signals.samples, **volumes})
            changed.update(volumes)
            self._fresh.update(volumes)
        self._evaluate(changed, links=bool(statuses))

    def _note_response(self, measured: Iterable[Event], late: str) -> None:
        """What was measured of the rig's own response, and why it is too slow ("")."""
        self._events += measured
        if late:
            self._raise("RESPONSE-LATE", late)

    def _evaluate(self, changed: Iterable[str], *, links: bool) -> None:
        program, now_ns = self._program, self._now_ns
        judge = Judge(self._conditions, self._signals.samples, self._told, now_ns)
        watching = program.watching
        for tag in changed:
            for watch in watching.get(tag, ()):
                judge.tag(watch)
        if self._gone:
            faults.clear(program, self._gone, judge, now_ns)
            self._gone = ()
        if self._faults.standing:
            faults.judge(program, self._faults, judge, now_ns)
        if links or now_ns >= self._faults.links_due_ns:
            self._faults = faults.links(program, self._faults, self._signals, judge, now_ns)
        self._conditions = judge.result()
        self._trip({watch.owner for watch in judge.changed})

    def _trip(self, touched: set[str]) -> None:
        program, now_ns = self._program, self._now_ns
        self._interlocks, tripped = interlocks.advance(
            program, self._interlocks, self._conditions, touched, self._running(), now_ns
        )
        self._alarms, raised = alarms.advance(program, self._alarms, self._conditions, touched, now_ns)
        self._tell(tripped, raised)

    def _tell(self, tripped: list[interlocks.Change], raised: list[alarms.Change]) -> None:
        if not tripped and not raised:
            return
        words = self._words()
        for change in tripped:
            self._events.append(words.interlock(change))
            if change.is_trip:
                self._trips.append((words, change))
            if change.before is LatchState.BYPASSED is change.after and change.event is LatchEvent.DEMAND:
                self._raise("BYPASS-DEMAND", f"{change.interlock.id} would have tripped but for its bypass")
        self._events += [words.alarm(change) for change in raised]

    def _raise(self, name: str, detail: str) -> None:
        """A fault found by protect itself; it is evaluated in the next scan, which is due at once."""
        key = (ConditionKind.FAULT, name)
        if key not in self._faults.standing:
            self._events.append(self._words().fault(name, detail))
            self._urgent = True
        self._faults = faults.report(self._faults, [(name, detail)], self._now_ns + faults.HOLD_NS)

    def answer(self, requests: Iterable[Request]) -> None:
        """Answer each request that is protect's with exactly one event."""
        for request in requests:
            if request.verb in PROTECT_VERBS:
                refusal, detail = self._carry_out(request)
                self._events.append(self._words().request(request, refusal, detail))

    def _carry_out(self, request: Request) -> tuple[str, str]:
        match request.verb:
            case Verb.STOP:
                return "", "the rig is being stopped with a flush"
            case Verb.CUT:
                return "", "everything is being stopped at once"
            case Verb.RESET:
                return self._reset(request)
            case Verb.ACKNOWLEDGE:
                self._alarms, raised, refusal = alarms.request(
                    self._program, self._alarms, AlarmEvent.ACK, request.target, request.who, self._now_ns
                )
                self._tell([], raised)
                return refusal, "acknowledged"
            case Verb.BYPASS:
                self._interlocks, changes, refusal = bypass.grant(
                    self._program, self._interlocks, self._conditions, request, self._now_ns
                )
                self._tell(changes, [])
                return refusal, "bypassed"
            case Verb.SHELVE | Verb.UNSHELVE | Verb.REMOVE | Verb.RETURN:
                return self._hide(request)
            case _:
                self._interlocks, refusal = bypass.end(self._program, self._interlocks, request, self._now_ns)
                self._trip(set() if refusal else {request.target})
                return refusal, "the bypass has ended"

    def _hide(self, request: Request) -> tuple[str, str]:
        event, granted = HIDING[request.verb]
        duration_ns = int(duration_s(request) * 1e9)
        wish = Wish(event, request.target, request.who, str(request.args.get("reason", "")), duration_ns)
        self._alarms, raised, refusal = alarms.ask(self._program, self._alarms, wish, self._now_ns)
        self._tell([], raised)
        return refusal, granted

    def _reset(self, request: Request) -> tuple[str, str]:
        """Reset an interlock, a latched alarm, or everything."""
        program, target = self._program, request.target
        is_alarm = target in self._alarms.states
        if not is_alarm and target != "*" and bypass.find(program, target) is None:
            return f"there is no interlock or alarm {target!r}", ""
        refusal = ""
        if not is_alarm:
            self._interlocks, changes, refusal = interlocks.reset(
                program, self._interlocks, self._conditions, target, request.who
            )
            self._tell(changes, [])
        if is_alarm or (target == "*" and refusal in ("", interlocks.NOTHING_TO_RESET)):
            self._alarms, raised, alarm_refusal = alarms.request(
                program, self._alarms, AlarmEvent.RESET, target, request.who, self._now_ns
            )
            self._tell([], raised)
            refusal = alarm_refusal if is_alarm or not alarm_refusal else refusal
        return refusal, "reset; nothing moves until a new start"

    def finish(self) -> ProtectStep:
        """Impose what must be imposed, and put the verdict into words for conduct."""
        scene = Scene(self._program, self._ledger, self._signals, self._memory, self._now_ns)
        stopping, events = stops.advance(scene, self._before.stopping, self._interlocks)
        first_out = self._interlocks.first_out
        self._events += [words.trip(change, first_out, stops.did(stopping)) for words, change in self._trips]
        self._events += events
        if stopping.overdue:
            names = ", ".join(stopping.overdue)
            self._raise("STOP-UNCONFIRMED", f"{names} was told to stop and does not confirm it")
        trips = [change for _, change in self._trips]
        timed, measured, late = reaction.advance(
            self._program, self._before.timed, trips, self._conditions, self._memory, stopping, self._now_ns
        )
        self._note_response(measured, late)
        state = ProtectState(
            self._signals,
            self._conditions,
            self._faults,
            self._interlocks,
            self._alarms,
            self._ledger,
            stopping,
            self._early,
            timed,
            self._verdict(stopping),
            frozenset(self._fresh),
        )
        return ProtectStep(state, stopping.demand, tuple(self._events), self._wake_ns(stopping))

    def _verdict(self, stopping: Stopping) -> Verdict:
        before = self._before
        if (
            stopping is before.stopping
            and self._interlocks is before.interlocks
            and self._alarms.hold_wanted == before.alarms.hold_wanted
            and self._alarms.hidden == before.alarms.hidden
        ):
            return before.verdict
        held_by = self._interlocks.first_out if self._interlocks.level is Stop.HOLD else self._alarms.hold_wanted
        return Verdict(
            stop=stopping.level,
            permit=self._interlocks.permit,
            quench_active=stopping.flush is not None,
            stop_done=stopping.level >= Stop.QUENCH and stopping.done,
            first_out=self._interlocks.first_out,
            hold_wanted=held_by,
            hidden_alarm=self._alarms.hidden,
        )

    def _wake_ns(self, stopping: Stopping) -> int:
        if self._urgent:
            return self._now_ns + 1
        due = (
            self._signals.due_ns,
            self._faults.due_ns,
            self._faults.links_due_ns,
            self._interlocks.due_ns,
            self._alarms.due_ns,
            stopping.due_ns,
        )
        return min((at_ns for at_ns in due if at_ns > self._now_ns), default=NEVER_NS)

    def _running(self) -> bool:
        """True while a pump delivers or fills, or was told to."""
        samples, feedback = self._signals.samples, self._program.feedback
        for pump in self._program.pumps:
            told = self._memory.told.get((pump, Aspect.RATE))
            if told is not None and told.order.action is Action.DELIVER and told.stands:
                return True
            sample = samples.get(feedback.get((pump, "state"), ""))
            if sample is not None and sample.value in (PumpState.DELIVERING, PumpState.REFILLING):
                return True
        return False

    def _told(self, tag: str) -> Told | None:
        """What the unit behind a feedback tag was told, and from when on its feedback must agree.

        An order that the unit refused counts as well: it is not where it should be.
        """
        unit, channel = self._program.carries.get(tag, ("", ""))
        aspect = _ASPECT_OF.get(channel)
        told = None if aspect is None else self._memory.told.get((unit, aspect))
        if told is None:
            return None
        base_ns = told.answered_ns if told.result is Result.DONE else told.order.t_ns + UNANSWERED_NS
        valve = self._program.valves.get(unit)
        travel_ns = 0 if valve is None else int(valve.travel_s * 1e9)
        allowed_ns = SETTLE_NS[channel] + travel_ns + self._program.options.travel_floor_ns
        return Told(told.order.value, base_ns + allowed_ns)

    def _words(self) -> Words:
        return Words(self._program, self._signals, self._conditions, self._faults, self._now_ns, self._early.remarks)


_ASPECT_OF = {"position": Aspect.POSITION, "setpoint": Aspect.SET_POINT, "flow": Aspect.RATE}
