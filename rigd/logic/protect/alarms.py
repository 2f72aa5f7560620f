"""All alarms against one image: delays, flags that hide, acknowledgement, repetition, and a record of each change.

An alarm tells a person and never changes an interlock: this module is given channels and returns records, nothing else.
The wish for a hold comes from the condition alone, so that shelving or acknowledging cannot move the rig either. A bad
tag leaves an alarm as it is; that the tag is bad is told by its interlock or link.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.protect import alarm_core
from rigd.logic.protect.alarm_core import AlarmEvent, AlarmState, Announce
from rigd.logic.protect.alarm_overlay import RESYNC, Flag, FlagEvent, hidden_move, turn
from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.timers import NEVER_NS, QUIET, Delay
from rigd.model.protection import Alarm

if TYPE_CHECKING:
    from rigd.logic.program import Program


@dataclass(frozen=True, slots=True)
class Hiding:
    """Who hides an alarm, why, since when, and until when (``NEVER_NS``: until it is taken back)."""

    who: str
    reason: str
    since_ns: int
    until_ns: int = NEVER_NS


@dataclass(frozen=True, slots=True)
class Running:
    """Running state of one alarm; ``since_ns`` is when it left normal, ``again_ns`` when it is due to be repeated."""

    state: AlarmState = AlarmState.NORMAL
    delay: Delay = QUIET
    since_ns: int = 0
    again_ns: int = NEVER_NS
    shelved: Hiding | None = None
    suppressed: bool = False
    removed: Hiding | None = None

    @property
    def flag(self) -> Flag | None:
        """The flag that is shown: out of service over suppressed over shelved; ``None`` when nothing hides it."""
        if self.removed is not None:
            return Flag.OUT_OF_SERVICE
        if self.suppressed:
            return Flag.SUPPRESSED
        return None if self.shelved is None else Flag.SHELVED

    @property
    def words(self) -> str:
        """What a screen says: the flag, else the core state."""
        return self.state.words if self.flag is None else self.flag.words

    @property
    def until_ns(self) -> int:
        """When shelving ends by itself; ``NEVER_NS`` when it is not shelved."""
        return NEVER_NS if self.shelved is None else self.shelved.until_ns


@dataclass(frozen=True, slots=True)
class Change:
    """One event of an alarm, for the record. ``before`` and ``after`` are the whole states around it."""

    alarm: Alarm
    before: Running
    after: Running
    event: AlarmEvent | FlagEvent
    announce: Announce
    by: str = ""
    reason: str = ""


@dataclass(frozen=True, slots=True)
class Alarms:
    """All of them. ``hold_wanted`` names a standing one that asks for a hold, ``hidden`` one that a person hides
    although an interlock looks at its signal."""

    states: Mapping[str, Running]
    due_ns: int = NEVER_NS
    hold_wanted: str = ""
    hidden: str = ""


def initial(program: Program) -> Alarms:
    """All normal and none hidden: a restart shows rather than hides."""
    return Alarms({alarm.id: Running() for alarm in program.alarms})


def advance(
    program: Program, alarms: Alarms, conditions: Conditions, touched: Iterable[str], now_ns: int
) -> tuple[Alarms, list[Change]]:
    """Evaluate the alarms whose condition changed or whose time has come."""
    names = set(touched)
    due = now_ns >= alarms.due_ns
    chosen = [alarm for alarm in program.alarms if alarm.id in names or (due and _due_ns(alarm, alarms) <= now_ns)]
    if not chosen:
        return alarms, []
    states = dict(alarms.states)
    changes: list[Change] = []
    for alarm in chosen:
        states[alarm.id] = _step(program, alarm, states[alarm.id], conditions, now_ns, changes)
    return _settle(program, replace(alarms, states=states)), changes


def _step(
    program: Program, alarm: Alarm, state: Running, conditions: Conditions, now_ns: int, changes: list[Change]
) -> Running:
    """One alarm, one scan: what hides it, then its condition, then its repetition."""
    if now_ns >= state.until_ns:
        state = _drop(alarm, state, FlagEvent.SHELVE_EXPIRE, replace(state, shelved=None), now_ns, changes)
    causes = program.causes[alarm.id]
    if len(causes) > 1:
        state = _suppress(alarm, state, conditions.channels[causes[1].index], now_ns, changes)
    state = _judge(alarm, state, conditions.channels[causes[0].index], now_ns, changes)
    if now_ns >= state.again_ns:
        state = _apply(alarm, state, AlarmEvent.REALARM, now_ns, changes)
    return state


def _judge(alarm: Alarm, state: Running, channel: Channel, now_ns: int, changes: list[Change]) -> Running:
    if channel is not Channel.CLEAR and channel is not Channel.ACTIVE:
        return replace(state, delay=Delay(state.delay.output))
    delay = state.delay.advance(channel is Channel.ACTIVE, now_ns, alarm.on_delay_ns, alarm.off_delay_ns)
    if delay is state.delay:
        return state
    after = replace(state, delay=delay)
    if delay.output is state.delay.output:
        return after
    return _apply(alarm, after, AlarmEvent.COND_ON if delay.output else AlarmEvent.COND_OFF, now_ns, changes)


def _suppress(alarm: Alarm, state: Running, channel: Channel, now_ns: int, changes: list[Change]) -> Running:
    """Follow the rule that suppresses by design; what cannot be believed hides nothing."""
    wanted = channel is Channel.ACTIVE
    if wanted is state.suppressed:
        return state
    after = replace(state, suppressed=wanted)
    if not wanted:
        return _drop(alarm, state, FlagEvent.SUPPRESS_LOGIC_OFF, after, now_ns, changes)
    return _hide(alarm, state, FlagEvent.SUPPRESS_LOGIC_ON, after, changes)


def _apply(
    alarm: Alarm, state: Running, event: AlarmEvent, now_ns: int, changes: list[Change], by: str = ""
) -> Running:
    """An event of the core; a rejected or ignored one changes nothing."""
    move = alarm_core.move if state.flag is None else hidden_move
    found = move(state.state, event, latching=alarm.latching, needs_acknowledge=alarm.needs_acknowledge)
    if found.result != "ok":
        return state
    since_ns = now_ns if state.state is AlarmState.NORMAL else state.since_ns
    after = _timed(alarm, replace(state, state=found.to, since_ns=since_ns), now_ns)
    changes.append(Change(alarm, state, after, event, found.announce, by))
    return after


def _hide(
    alarm: Alarm, before: Running, event: FlagEvent, after: Running, changes: list[Change], by: str = "", why: str = ""
) -> Running:
    after = replace(after, again_ns=NEVER_NS)
    changes.append(Change(alarm, before, after, event, Announce.NOTHING, by, why))
    return after


def _drop(
    alarm: Alarm, before: Running, event: FlagEvent, after: Running, now_ns: int, changes: list[Change], by: str = ""
) -> Running:
    """A flag has dropped; when it was the last one, what still stands is told anew."""
    announce = Announce.NOTHING
    if after.flag is None:
        state, announce = RESYNC[after.state]
        after = _timed(alarm, replace(after, state=state), now_ns)
    changes.append(Change(alarm, before, after, event, announce, by))
    return after


def _timed(alarm: Alarm, state: Running, now_ns: int) -> Running:
    """With the time of its repetition: after each announcement and acknowledgement of what can still be repeated."""
    repeats = alarm.realarm_ns and state.flag is None and state.state not in _SILENT
    return replace(state, again_ns=now_ns + alarm.realarm_ns if repeats else NEVER_NS)


_SILENT = (AlarmState.NORMAL, AlarmState.LATCHED_ACKNOWLEDGED)


def request(
    program: Program, alarms: Alarms, event: AlarmEvent, target: str, who: str, now_ns: int
) -> tuple[Alarms, list[Change], str]:
    """Acknowledge or reset one alarm, or all that can be for "*". Returns the refusal, "" when something was done."""
    chosen = [alarm for alarm in program.alarms if target in ("*", alarm.id)]
    if not chosen:
        return alarms, [], f"there is no alarm {target!r}"
    states = dict(alarms.states)
    changes: list[Change] = []
    for alarm in chosen:
        states[alarm.id] = _apply(alarm, states[alarm.id], event, now_ns, changes, who)
    if not changes:
        what = "acknowledge" if event is AlarmEvent.ACK else "reset"
        flag = alarms.states[target].flag if target in alarms.states else None
        if flag is not None:
            return alarms, [], f"{target} is {flag.words}: there is nothing to {what}"
        return alarms, [], f"there is nothing to {what}" if target == "*" else f"{target} has nothing to {what}"
    return _settle(program, replace(alarms, states=states)), changes, ""


@dataclass(frozen=True, slots=True)
class Wish:
    """What a person asks of the flags of one alarm; ``duration_ns`` is for shelving."""

    event: FlagEvent
    target: str
    who: str
    reason: str = ""
    duration_ns: int = 0


def ask(program: Program, alarms: Alarms, wish: Wish, now_ns: int) -> tuple[Alarms, list[Change], str]:
    """Shelve, unshelve, take out of service or return one alarm. Returns the refusal, "" when granted."""
    alarm = next((alarm for alarm in program.alarms if alarm.id == wish.target), None)
    if alarm is None:
        return alarms, [], f"there is no alarm {wish.target!r}"
    changes: list[Change] = []
    after, refusal = _ASKED[wish.event](alarm, alarms.states[alarm.id], wish, now_ns, changes)
    if refusal:
        return alarms, [], f"{alarm.id}: {refusal}"
    return _settle(program, replace(alarms, states={**alarms.states, alarm.id: after})), changes, ""


def _shelve(alarm: Alarm, state: Running, wish: Wish, now_ns: int, changes: list[Change]) -> tuple[Running, str]:
    since_ns = now_ns if state.shelved is None else state.shelved.since_ns
    until_ns = now_ns + wish.duration_ns
    refusal = _unnamed(wish)
    if not alarm.shelvable:
        refusal = "it tells of a trip or of lost protection and is never shelved"
    elif wish.duration_ns <= 0 or until_ns - since_ns > alarm.shelve_max_ns:
        refusal = f"shelving needs a time of at most {alarm.shelve_max_ns / 60e9:g} min in all"
    if turn(Flag.SHELVED, state.shelved is not None, FlagEvent.SHELVE, not refusal).result == "rejected":
        return state, refusal
    hiding = Hiding(wish.who, wish.reason, since_ns, until_ns)
    after = replace(state, shelved=hiding)
    return _hide(alarm, state, wish.event, after, changes, wish.who, wish.reason), ""


def _unshelve(alarm: Alarm, state: Running, wish: Wish, now_ns: int, changes: list[Change]) -> tuple[Running, str]:
    if turn(Flag.SHELVED, state.shelved is not None, FlagEvent.UNSHELVE).result == "rejected":
        return state, "it is not shelved"
    return _drop(alarm, state, wish.event, replace(state, shelved=None), now_ns, changes, wish.who), ""


def _remove(alarm: Alarm, state: Running, wish: Wish, now_ns: int, changes: list[Change]) -> tuple[Running, str]:
    refusal = _unnamed(wish)
    if turn(Flag.OUT_OF_SERVICE, state.removed is not None, FlagEvent.REMOVE, not refusal).result == "rejected":
        return state, refusal or "it is out of service already"
    after = replace(state, removed=Hiding(wish.who, wish.reason, now_ns))
    return _hide(alarm, state, wish.event, after, changes, wish.who, wish.reason), ""


def _return(alarm: Alarm, state: Running, wish: Wish, now_ns: int, changes: list[Change]) -> tuple[Running, str]:
    named = bool(wish.who.strip())
    if turn(Flag.OUT_OF_SERVICE, state.removed is not None, FlagEvent.RETURN, named).result == "rejected":
        return state, "it is not out of service" if named else _unnamed(wish)
    return _drop(alarm, state, wish.event, replace(state, removed=None), now_ns, changes, wish.who), ""


_ASKED = {
    FlagEvent.SHELVE: _shelve,
    FlagEvent.UNSHELVE: _unshelve,
    FlagEvent.REMOVE: _remove,
    FlagEvent.RETURN: _return,
}


def _unnamed(wish: Wish) -> str:
    """Why an alarm may not be hidden by just anybody for no reason; "" when name and reason are given."""
    if not wish.who.strip():
        return "it needs the name of the person who asks"
    return "" if wish.reason.strip() else "it needs a reason"


def _settle(program: Program, alarms: Alarms) -> Alarms:
    states = alarms.states
    due_ns = min((_due_ns(alarm, alarms) for alarm in program.alarms), default=NEVER_NS)
    holding = (alarm.id for alarm in program.alarms if alarm.hold and states[alarm.id].delay.output)
    hidden = (one.id for one in program.alarms if _hidden_by_a_person(states[one.id]) and _is_interlocked(program, one))
    return replace(alarms, due_ns=due_ns, hold_wanted=next(holding, ""), hidden=next(hidden, ""))


def _hidden_by_a_person(state: Running) -> bool:
    return state.shelved is not None or state.removed is not None


def _is_interlocked(program: Program, alarm: Alarm) -> bool:
    """True when an interlock looks at the alarm's signal too."""
    watches = program.watching.get(program.causes[alarm.id][0].tag, ())
    return any(watch.owner == interlock.id for watch in watches for interlock in program.interlocks)


def _due_ns(alarm: Alarm, alarms: Alarms) -> int:
    state = alarms.states[alarm.id]
    delay_ns = state.delay.due_ns(alarm.on_delay_ns, alarm.off_delay_ns)
    return min(delay_ns, state.again_ns, state.until_ns)
