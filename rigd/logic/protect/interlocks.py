"""All interlocks against one image: vote, delay, latch, first-out, and the record of each trip.

House rules: a cause only ever adds a demand; nothing but a reset by a named person takes a trip back; the first trip of
a group (everything since no interlock was tripped) keeps the name first-out, later ones are numbered. When two trip in
one scan, the cause whose sample was acquired earlier comes first, then the order of the rig file.
Bad quality: by the interlock's policy; too few healthy channels trip under either policy. Restart: all start tripped.
A voting left degraded under policy N is announced and ends in a trip after ``DEGRADED_NS``, unattended at once. A
channel that disagrees with its partners for too long is bad. A start-up override begins once after a reset, with the
first movement, and can only end.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.interlock_vote import Vote, vote
from rigd.logic.protect.latch import LatchEvent, LatchState, move
from rigd.logic.protect.timers import NEVER_NS, QUIET, Delay
from rigd.model.orders import Stop
from rigd.model.protection import Armed, Interlock, OnBad

if TYPE_CHECKING:
    from rigd.logic.program import Program

DEGRADED_NS = 30 * 60 * 1_000_000_000
"""How long an attended rig may run on a voting that has lost a channel (proposal; no source)."""

REQUESTS = ("STOP-REQUEST", "CUT-REQUEST")
"""A wish to stop ends the run even before the first reset; other causes at the start-up are no first-out."""

NOTHING_TO_RESET = "there is nothing to reset"


@dataclass(frozen=True, slots=True)
class Bypass:
    """Who took an interlock out, why, and until when."""

    who: str
    reason: str
    until_ns: int
    ended_by: str = ""


@dataclass(frozen=True, slots=True)
class Running:
    """Running state of one interlock. ``numbered`` are the causes already recorded in this group of trips.

    ``discord`` is on while partners disagree; ``override_ns`` is when the start-up override ends (``NEVER_NS``: it has
    not begun since the last reset, in the past: it is over).
    """

    latch: LatchState = LatchState.TRIPPED_CLEAR
    delay: Delay = QUIET
    bypass: Bypass | None = None
    numbered: frozenset[int] = frozenset()
    degraded_ns: int = NEVER_NS
    discord: Delay = QUIET
    override_ns: int = NEVER_NS
    overridden: bool = False

    def due_ns(self, interlock: Interlock) -> int:
        """The next time at which this state changes by itself."""
        due_ns = self.delay.due_ns(interlock.on_delay_ns, interlock.clear_delay_ns)
        due_ns = min(due_ns, self.discord.due_ns(interlock.discord_ns, interlock.clear_delay_ns))
        if self.bypass is not None:
            due_ns = min(due_ns, self.bypass.until_ns)
        if self.overridden:
            due_ns = min(due_ns, self.override_ns)
        return min(due_ns, self.degraded_ns) if self.delay == QUIET else due_ns


@dataclass(frozen=True, slots=True)
class Change:
    """One transition, for the record. ``number`` counts the causes of a group, 1 is first-out; 0 is not a cause."""

    interlock: Interlock
    before: LatchState
    after: LatchState
    event: LatchEvent
    causes: tuple[int, ...] = ()
    number: int = 0
    note: str = ""

    @property
    def is_trip(self) -> bool:
        """True when run permission was taken by a cause."""
        return self.before.permits and self.after is LatchState.TRIPPED_ACTIVE


@dataclass(frozen=True, slots=True)
class Interlocks:
    """All of them. ``count`` causes were recorded in this group; ``released`` once everything had been reset.

    ``level`` is the stop asked for and ``driver`` the interlock that raised it to that.
    """

    states: Mapping[str, Running]
    due_ns: int
    first_out: str = ""
    count: int = 0
    released: bool = False
    running: bool = False
    level: Stop = Stop.CUT
    driver: str = ""
    permit: bool = False


def initial(program: Program, now_ns: int) -> Interlocks:
    """Start-up is a trip: every interlock needs a reset."""
    started = move(LatchState.INIT, LatchEvent.PWR).to
    return Interlocks({interlock.id: Running(started) for interlock in program.interlocks}, now_ns)


def ballot(program: Program, interlock: Interlock, conditions: Conditions, running: bool, state: Running) -> Vote:
    """The vote of an interlock in its present state."""
    discord, overridden = state.discord.output, state.overridden
    return vote(program, interlock, conditions, running=running, discord=discord, overridden=overridden)


def advance(
    program: Program,
    interlocks: Interlocks,
    conditions: Conditions,
    touched: Iterable[str],
    running: bool,
    now_ns: int,
) -> tuple[Interlocks, list[Change]]:
    """Evaluate the interlocks whose channels changed, whose time has come, or whose arming changed."""
    names = set(touched)
    if now_ns >= interlocks.due_ns:
        names.update(i.id for i in program.interlocks if interlocks.states[i.id].due_ns(i) <= now_ns)
    if running is not interlocks.running:
        names.update(i.id for i in program.interlocks if i.armed is Armed.RUNNING or i.startup_ns)
    if not names:
        return interlocks, []
    states = dict(interlocks.states)
    changes: list[Change] = []
    for interlock in program.interlocks:
        if interlock.id in names:
            before = _prepare(program, interlock, states[interlock.id], conditions, (running, now_ns), changes)
            heard = ballot(program, interlock, conditions, running, before)
            states[interlock.id] = after = _step(program, interlock, before, heard, now_ns, changes)
            assert after.latch.permits or after.bypass is None, "a tripped interlock is never bypassed"
    changes.sort(key=lambda change: _earliest(change, conditions, now_ns))
    numbered, count, first_out = _number(changes, interlocks)
    result = replace(interlocks, states=states, running=running, count=count, first_out=first_out)
    return settle(program, result), numbered


def settle(program: Program, interlocks: Interlocks) -> Interlocks:
    """Derive the stop level, the permit and the next due time from the states of all interlocks.

    The level is never taken down while anything is tripped. Interlocks that only ask for a hold take the
    permit before the first reset, not after it: the sequence must be able to hold.
    """
    states = interlocks.states
    tripped = [interlock for interlock in program.interlocks if not states[interlock.id].latch.permits]
    released = interlocks.released or not tripped
    level = max((interlock.stop for interlock in tripped), default=Stop.NONE)
    driver = interlocks.driver if tripped else ""
    if tripped and released and (level > interlocks.level or not driver):
        leading = [interlock.id for interlock in tripped if interlock.stop is level]
        driver = interlocks.first_out if interlocks.first_out in leading else leading[0]
    if tripped:
        level = max(level, interlocks.level)
    return replace(
        interlocks,
        due_ns=min(states[interlock.id].due_ns(interlock) for interlock in program.interlocks),
        released=released,
        level=level,
        driver=driver,
        permit=released and level <= Stop.HOLD,
        first_out=interlocks.first_out if tripped else "",
        count=interlocks.count if tripped else 0,
    )


def _step(
    program: Program, interlock: Interlock, state: Running, heard: Vote, now_ns: int, changes: list[Change]
) -> Running:
    """One interlock, one scan."""
    state = _end_bypass(interlock, state, heard, now_ns, changes)
    state, overdue = _degrade(program, interlock, state, heard, now_ns, changes)
    wanted = heard.demand or overdue
    delay = state.delay.advance(wanted, now_ns, interlock.on_delay_ns, interlock.clear_delay_ns)
    rose, fell = delay.output and not state.delay.output, state.delay.output and not delay.output
    state = replace(state, delay=delay) if delay is not state.delay else state
    fresh = tuple(cause for cause in heard.causes if cause not in state.numbered)
    if rose or (delay.output and fresh and wanted):
        event = LatchEvent.DEMAND if heard.protected else LatchEvent.BAD
        note = f"degraded to {heard.rule.equivalent} for too long" if overdue and not heard.demand else ""
        return _apply(interlock, state, event, changes, causes=fresh or heard.causes or heard.bad, note=note)
    if fell:
        return replace(_apply(interlock, state, LatchEvent.CLEAR, changes), numbered=frozenset())
    return state


def _prepare(
    program: Program,
    interlock: Interlock,
    state: Running,
    conditions: Conditions,
    at: tuple[bool, int],
    changes: list[Change],
) -> Running:
    """What must be known before the votes are counted: do the channels agree, and does a start-up override count."""
    running, now_ns = at
    if interlock.witnesses:
        witnesses = program.causes[interlock.id][len(interlock.causes) :]
        apart = any(conditions.channels[watch.index] is Channel.ACTIVE for watch in witnesses)
        discord = state.discord.advance(apart, now_ns, interlock.discord_ns, interlock.clear_delay_ns)
        state = state if discord is state.discord else replace(state, discord=discord)
    if not interlock.startup_ns:
        return state
    if running and state.override_ns == NEVER_NS and state.latch.permits:
        note = f"start-up override for {interlock.startup_ns / 1e9:g} s"
        changes.append(Change(interlock, state.latch, state.latch, LatchEvent.CLEAR, note=note))
        return replace(state, override_ns=now_ns + interlock.startup_ns, overridden=True)
    if state.overridden and now_ns >= state.override_ns:
        changes.append(Change(interlock, state.latch, state.latch, LatchEvent.CLEAR, note="end of its override"))
        return replace(state, overridden=False)
    return state


def _apply(
    interlock: Interlock,
    state: Running,
    event: LatchEvent,
    changes: list[Change],
    *,
    guard: bool = False,
    causes: tuple[int, ...] = (),
    note: str = "",
) -> Running:
    after = move(state.latch, event, guard).to
    changes.append(Change(interlock, state.latch, after, event, causes, note=note))
    return replace(state, latch=after, numbered=state.numbered | set(causes))


def _end_bypass(interlock: Interlock, state: Running, heard: Vote, now_ns: int, changes: list[Change]) -> Running:
    if state.bypass is None or now_ns < state.bypass.until_ns:
        return state
    note = f"bypass ended by {state.bypass.ended_by}" if state.bypass.ended_by else "the bypass has expired"
    if not heard.demand:
        return _apply(interlock, replace(state, bypass=None), LatchEvent.BYP_END, changes, note=note)
    bare = replace(state, bypass=None, delay=Delay(True))
    return _apply(interlock, bare, LatchEvent.BYP_END, changes, guard=True, causes=heard.causes, note=note)


def _degrade(
    program: Program, interlock: Interlock, state: Running, heard: Vote, now_ns: int, changes: list[Change]
) -> tuple[Running, bool]:
    """Watch a voting that lost a channel under policy N; True when it has been so for too long."""
    whole = interlock.architecture == heard.rule.equivalent
    if interlock.on_bad is OnBad.TRIP or whole or not heard.protected:
        return (state if state.degraded_ns == NEVER_NS else replace(state, degraded_ns=NEVER_NS)), False
    if state.degraded_ns == NEVER_NS:
        allowed_ns = 0 if program.options.unattended else DEGRADED_NS
        state = replace(state, degraded_ns=now_ns + allowed_ns)
        note = f"a channel is bad, {interlock.architecture} degraded to {heard.rule.equivalent}"
        changes.append(Change(interlock, state.latch, state.latch, LatchEvent.BAD, note=note))
    return state, now_ns >= state.degraded_ns


def _earliest(change: Change, conditions: Conditions, now_ns: int) -> int:
    return min((conditions.since_ns.get(cause, now_ns) for cause in change.causes), default=now_ns)


def _number(changes: list[Change], before: Interlocks) -> tuple[list[Change], int, str]:
    """Number the causes of a group in the order in which they came."""
    count, first_out = before.count, before.first_out
    numbered = []
    for change in changes:
        if (
            change.causes
            and change.after is LatchState.TRIPPED_ACTIVE
            and (before.released or change.interlock.id in REQUESTS)
        ):
            count += 1
            change = replace(change, number=count)
            first_out = first_out or change.interlock.id
        numbered.append(change)
    return numbered, count, first_out


def reset(
    program: Program, interlocks: Interlocks, conditions: Conditions, target: str, who: str
) -> tuple[Interlocks, list[Change], str]:
    """Reset one interlock, or all for "*"; all or nothing. Returns the refusal, "" when granted."""
    chosen = [i for i in program.interlocks if target in ("*", i.id) and not interlocks.states[i.id].latch.permits]
    if not chosen:
        return interlocks, [], NOTHING_TO_RESET
    if not who:
        return interlocks, [], "a reset needs the name of the person who resets"
    refusals = [_reset_refusal(program, i, interlocks, conditions) for i in chosen]
    if any(refusals):
        return interlocks, [], "; ".join(refusal for refusal in refusals if refusal)
    states = dict(interlocks.states)
    changes: list[Change] = []
    for interlock in chosen:
        after = _apply(interlock, states[interlock.id], LatchEvent.RESET, changes, guard=True, note=f"reset by {who}")
        states[interlock.id] = replace(after, numbered=frozenset(), override_ns=NEVER_NS, overridden=False)
    return settle(program, replace(interlocks, states=states)), changes, ""


def _reset_refusal(program: Program, interlock: Interlock, interlocks: Interlocks, conditions: Conditions) -> str:
    """Why an interlock cannot be reset now: the table, and a cause that is present but still within its delay."""
    heard = ballot(program, interlock, conditions, interlocks.running, interlocks.states[interlock.id])
    rejected = move(interlocks.states[interlock.id].latch, LatchEvent.RESET, guard=True).rejected
    if heard.demand:
        rejected = "its cause is still present"
    elif rejected:
        rejected = "its cause has gone, but not for long enough yet"
    elif heard.unknown:
        rejected = f"{', '.join(heard.unknown)} has not been heard of yet"
    return f"{interlock.id} ({interlock.title}): {rejected}" if rejected else ""
