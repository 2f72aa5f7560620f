"""The dry shell: plant and core in virtual time, in one plain loop. No bytes, no tasks, no waiting.

House rules of this file. Time jumps from one due thing to the next: a poll, a request, the core's own wake time. At
each stop the plant is brought up to date, what is due is read, the core decides once, and its orders reach the plant in
the same instant; their outcomes are part of the next intake. Equal inputs give equal runs: nothing here depends on the
wall, on hashing or on set order.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

from rigd.logic import scan
from rigd.logic.program import Program
from rigd.logic.run_end import RunEnd
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Order, Outcome, Request, Result, Verb
from rigd.model.samples import Reading, Sample, Spectrum
from rigd.ports.journal import Journal
from rigd.ports.plant import NO_ANSWER, Plant, PowerAware
from rigd.runtime.dry_links import DryLinks
from rigd.runtime.polls import Poll, polls_of, samples_of
from rigd.runtime.tape import Tape

NEVER_NS = 1 << 62
LONGEST_NS = 14 * 86_400 * 1_000_000_000
"""A dry run that is not over after two weeks of its own time is ended and said to be endless."""


class Derive(Protocol):
    """Turns a spectrum into readings of the derived channels of its device, and hears what happens in the run."""

    def __call__(self, spectrum: Spectrum) -> Sequence[Reading]:
        """The readings."""

    def hear(self, events: Sequence[Event]) -> None:
        """What happened."""

    def keep(self, taken: Callable[[Spectrum], None]) -> None:
        """Hand each reference spectrum to ``taken`` from now on."""


@dataclass(frozen=True, slots=True)
class Visit:
    """Somebody to call when the rehearsal has come to a moment; the plant is up to date then."""

    t_ns: int
    call: Callable[[int], None]


@dataclass(frozen=True, slots=True)
class DryOptions:
    """Who acts as the person, what else is asked and when, and when to give up (process time).

    A run that is held for ``held_ns`` waits for a person who does not come, and is ended.
    ``visits`` call somebody at their times, with the plant up to date; ``afterwards`` is asked once the run is over.
    """

    requests: tuple[Request, ...] = ()
    signer: str = "dry run"
    limit_ns: int = LONGEST_NS
    linger_ns: int = 2_000_000_000
    held_ns: int = 2 * 3_600_000_000_000
    visits: tuple[Visit, ...] = ()
    afterwards: tuple[Verb, ...] = ()


@dataclass(slots=True)
class DryResult:
    """What came out; ``digest`` is the SHA-256 over all orders and events in their order. ``signal``: time [ns] and
    value of the tag by which points are judged."""

    outcome: str
    exit_code: int
    text: str
    digest: str
    end_ns: int
    state: scan.CoreState
    events: list[Event]
    peak: dict[str, float]
    scans: int
    signal: list[tuple[int, float]] = field(default_factory=list)


def signal_of(program: Program) -> str:
    """The tag by which points are judged steady."""
    return program.recipe.settle.signal if program.recipe else ""


def first_requests(program: Program, signer: str) -> tuple[Request, ...]:
    """What a person does at the start: reset, sign every item, start."""
    steps = [(Verb.RESET, "*"), (Verb.CONFIRM, "*"), (Verb.START, "")]
    if program.recipe is None:
        steps = steps[:1]
    return tuple(
        Request(f"person-{i}", verb, signer, (2 + i) * 1_000_000_000, target) for i, (verb, target) in enumerate(steps)
    )


def unfinished(now_ns: int, events: Sequence[Event]) -> RunEnd:
    """The end of a rehearsal that did not come to one, with what it was waiting for."""
    text = f"The recipe was not over after {now_ns / 3.6e12:.1f} h and was ended here."
    states = [event for event in events if event.kind is EventKind.RUN_STATE]
    if states and states[-1].subject == "HELD":
        text += f" It waited for a person, and none comes in a rehearsal: {states[-1].text}"
    return RunEnd("stopped", 1, text)


def _held_since(events: Sequence[Event], before_ns: int) -> int:
    for event in events:
        if event.kind is EventKind.RUN_STATE:
            before_ns = event.t_ns if event.subject == "HELD" else NEVER_NS
    return before_ns


class DryShell:
    """Runs one program on one plant. ``watch`` is called once per simulated second with the time and the state."""

    def __init__(
        self,
        program: Program,
        plant: Plant,
        derived: Mapping[str, Derive] | None = None,
        journal: Journal | None = None,
        watch: Callable[[int, scan.CoreState], None] | None = None,
    ) -> None:
        self._program = program
        self._plant = plant
        self._derived = derived or {}
        self._journal = journal
        if journal is not None:
            for derive in self._derived.values():
                derive.keep(journal.spectrum)
        self._watch = watch
        self._polls = [poll for device in program.rig.devices for poll in polls_of(program.rig, device)]
        restarts = plant.restarts if isinstance(plant, PowerAware) else tuple
        self._links = DryLinks((device.id for device in program.rig.devices), restarts)
        self._last_ns: dict[str, int] = {}
        self._queue: list[tuple[int, int, object]] = []
        self._sequence = 0
        self._watch_ns = 0
        self._scans = 0

    def run(self, options: DryOptions = DryOptions()) -> DryResult:
        """Run until the core says that the run is over (plus ``linger_ns``), or ``limit_ns`` has passed."""
        tape = Tape(signal_of(self._program))
        state = scan.initial(self._program, 0)
        for request in (*first_requests(self._program, options.signer), *options.requests):
            self._at(request.t_ns, request)
        for visit in options.visits:
            self._at(visit.t_ns, visit)
        for poll in self._polls:
            self._at(0, poll)
        outcomes: tuple[Outcome, ...] = ()
        wake_ns, end, end_ns, held_ns = 0, None, options.limit_ns, NEVER_NS
        now_ns = 0
        while True:
            due_ns = self._queue[0][0] if self._queue else options.limit_ns
            now_ns = min(max(now_ns, min(due_ns, wake_ns)), end_ns)
            self._plant.advance(now_ns)
            samples, requests = self._due(now_ns)
            links = self._links.news(now_ns)
            intake = Intake(samples=samples, outcomes=outcomes, links=links, requests=requests)
            step = self._decide(state, intake, now_ns)
            state, wake_ns = step.state, max(step.wake_ns, now_ns + 1_000_000)
            self._listen(step.events)
            tape.samples(samples)
            tape.decided(step.orders, step.events)
            outcomes = tuple(self._carry_out(order, now_ns) for order in step.orders)
            if outcomes:
                wake_ns = min(wake_ns, now_ns + 50_000_000)
            if end is None and (end := scan.run_end(self._program, state)) is not None:
                end_ns = min(end_ns, now_ns + options.linger_ns)
                for number, verb in enumerate(options.afterwards):
                    self._at(now_ns, Request(f"afterwards-{number}", verb, options.signer, now_ns))
            held_ns = _held_since(step.events, held_ns)
            if now_ns >= end_ns or now_ns - held_ns >= options.held_ns:
                break
        return self._result(end, tape, state, now_ns)

    def _at(self, t_ns: int, thing: object) -> None:
        self._sequence += 1
        heapq.heappush(self._queue, (t_ns, self._sequence, thing))

    def _due(self, now_ns: int) -> tuple[tuple[Sample, ...], tuple[Request, ...]]:
        samples: list[Sample] = []
        requests: list[Request] = []
        while self._queue and self._queue[0][0] <= now_ns:
            t_ns, _, thing = heapq.heappop(self._queue)
            if isinstance(thing, Poll):
                samples.extend(self._read(thing, now_ns))
                self._at(t_ns + thing.period_ns, thing)
            elif isinstance(thing, Request):
                requests.append(thing)
            elif isinstance(thing, Visit):
                thing.call(now_ns)
        return tuple(samples), tuple(requests)

    def _read(self, poll: Poll, now_ns: int) -> list[Sample]:
        if not poll.spectrum:
            readings = self._plant.read(poll.device, poll.channels)
            return samples_of(poll, self._links.heard(poll.device, readings, now_ns), now_ns)
        spectrum = self._plant.spectrum(poll.device)
        if not spectrum.absorbance or spectrum.t_ns == self._last_ns.get(poll.device):
            return []  # the same one as before: a detector that stands still turns stale, as it should
        self._last_ns[poll.device] = spectrum.t_ns
        if self._journal is not None:
            self._journal.spectrum(spectrum)
        return samples_of(poll, self._derived[poll.device](spectrum), now_ns)

    def _decide(self, state: scan.CoreState, intake: Intake, now_ns: int) -> scan.Step:
        self._scans += 1
        if self._journal is not None:
            self._journal.scan(self._scans, now_ns, "", intake)
        step = scan.scan(self._program, state, intake, now_ns)
        if self._journal is not None:
            self._journal.decided(self._scans, step.orders, step.events)
        if self._watch is not None and now_ns >= self._watch_ns:
            self._watch(now_ns, step.state)
            self._watch_ns = now_ns + 1_000_000_000
        return step

    def _listen(self, events: Sequence[Event]) -> None:
        if events:
            for derive in self._derived.values():
                derive.hear(events)

    def _carry_out(self, order: Order, now_ns: int) -> Outcome:
        refusal = self._plant.tell(order.unit, order.action, order.value)
        result = Result.FAILED if refusal == NO_ANSWER else Result.REFUSED if refusal else Result.DONE
        return Outcome(order.number, order.unit, order.action, result, now_ns, refusal)

    def _result(self, end: RunEnd | None, tape: Tape, state: scan.CoreState, now_ns: int) -> DryResult:
        end = end or unfinished(now_ns, tape.events)
        return DryResult(
            end.outcome,
            end.exit_code,
            end.text,
            tape.hash.hexdigest(),
            now_ns,
            state,
            tape.events,
            tape.peak,
            self._scans,
            tape.followed,
        )
