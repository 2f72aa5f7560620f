"""Alarms: the core machine A to F as a literal table, its delays, acknowledgement and reset.

States and events as in ANSI/ISA-18.2-2016 and IEC 62682; held row by row against tests/reference/alarm_core.csv. An
alarm tells a person and never changes an interlock: this module is given channels and returns records, nothing else. A
bad tag leaves an alarm as it is; that the tag is bad is told by its interlock or link.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.timers import NEVER_NS, QUIET, Delay
from rigd.model.protection import Alarm

if TYPE_CHECKING:
    from rigd.logic.program import Program


class AlarmState(StrEnum):
    """Core states; the letters are those of the standard."""

    NORMAL = "A"
    UNACKNOWLEDGED = "B"
    ACKNOWLEDGED = "C"
    RETURNED = "D"
    LATCHED_UNACKNOWLEDGED = "E"
    LATCHED_ACKNOWLEDGED = "F"

    @property
    def words(self) -> str:
        """The state's name for people."""
        return _WORDS[self]


_WORDS = {
    AlarmState.NORMAL: "normal",
    AlarmState.UNACKNOWLEDGED: "unacknowledged",
    AlarmState.ACKNOWLEDGED: "acknowledged",
    AlarmState.RETURNED: "returned, unacknowledged",
    AlarmState.LATCHED_UNACKNOWLEDGED: "latched, unacknowledged",
    AlarmState.LATCHED_ACKNOWLEDGED: "latched, acknowledged",
}


class AlarmEvent(StrEnum):
    """What can happen to an alarm; COND_ON comes after the on-delay, COND_OFF after deadband and off-delay."""

    COND_ON = "COND_ON"
    COND_OFF = "COND_OFF"
    ACK = "ACK"
    RESET = "RESET"
    REALARM = "REALARM"


class Announce(StrEnum):
    """What a move does to sound and light: fresh, repeated, silenced or nothing."""

    NEW = "new"
    AGAIN = "again"
    OFF = "off"
    NOTHING = "-"


@dataclass(frozen=True, slots=True)
class Move:
    """Where an event leads and what it does; ``result`` is ok, ignored or rejected."""

    to: AlarmState
    announce: Announce
    result: str


_A, _B, _C, _D, _E, _F = AlarmState
_ON, _OFF, _ACK, _RESET, _REALARM = AlarmEvent
_NEW, _AGAIN, _SILENT, _NOTHING = Announce

TABLE: dict[tuple[AlarmState, AlarmEvent], Move] = {
    (_A, _ON): Move(_B, _NEW, "ok"),
    (_A, _OFF): Move(_A, _NOTHING, "ignored"),
    (_A, _ACK): Move(_A, _NOTHING, "rejected"),
    (_A, _RESET): Move(_A, _NOTHING, "rejected"),
    (_A, _REALARM): Move(_A, _NOTHING, "ignored"),
    (_B, _ON): Move(_B, _NOTHING, "ignored"),
    (_B, _ACK): Move(_C, _SILENT, "ok"),
    (_B, _RESET): Move(_B, _NOTHING, "rejected"),
    (_B, _REALARM): Move(_B, _AGAIN, "ok"),
    (_C, _ON): Move(_C, _NOTHING, "ignored"),
    (_C, _ACK): Move(_C, _NOTHING, "rejected"),
    (_C, _RESET): Move(_C, _NOTHING, "rejected"),
    (_C, _REALARM): Move(_B, _AGAIN, "ok"),
    (_D, _ON): Move(_B, _NEW, "ok"),
    (_D, _OFF): Move(_D, _NOTHING, "ignored"),
    (_D, _ACK): Move(_A, _SILENT, "ok"),
    (_D, _RESET): Move(_D, _NOTHING, "rejected"),
    (_D, _REALARM): Move(_D, _AGAIN, "ok"),
    (_E, _ON): Move(_B, _NEW, "ok"),
    (_E, _OFF): Move(_E, _NOTHING, "ignored"),
    (_E, _ACK): Move(_F, _SILENT, "ok"),
    (_E, _RESET): Move(_E, _NOTHING, "rejected"),
    (_E, _REALARM): Move(_E, _AGAIN, "ok"),
    (_F, _ON): Move(_B, _NEW, "ok"),
    (_F, _OFF): Move(_F, _NOTHING, "ignored"),
    (_F, _ACK): Move(_F, _NOTHING, "rejected"),
    (_F, _RESET): Move(_A, _NOTHING, "ok"),
    (_F, _REALARM): Move(_F, _NOTHING, "ignored"),
}

GUARDED: dict[tuple[AlarmState, AlarmEvent], tuple[Move, Move, Move]] = {
    # no acknowledgement required, acknowledgement required, latching
    (_B, _OFF): (Move(_A, _SILENT, "ok"), Move(_D, _NOTHING, "ok"), Move(_E, _NOTHING, "ok")),
    (_C, _OFF): (Move(_A, _NOTHING, "ok"), Move(_A, _NOTHING, "ok"), Move(_F, _NOTHING, "ok")),
}


def move(state: AlarmState, event: AlarmEvent, *, latching: bool, needs_acknowledge: bool) -> Move:
    """The transition for an event. A latching alarm always needs acknowledgement."""
    guarded = GUARDED.get((state, event))
    if guarded is None:
        return TABLE[state, event]
    return guarded[2 if latching else int(needs_acknowledge)]


@dataclass(frozen=True, slots=True)
class Running:
    """Running state of one alarm; ``since_ns`` is when it left normal."""

    state: AlarmState = AlarmState.NORMAL
    delay: Delay = QUIET
    since_ns: int = 0


@dataclass(frozen=True, slots=True)
class Change:
    """One transition of an alarm, for the record."""

    alarm: Alarm
    before: AlarmState
    after: AlarmState
    announce: Announce
    by: str = ""


@dataclass(frozen=True, slots=True)
class Alarms:
    """All of them; ``hold_wanted`` names a standing one that asks for a hold."""

    states: Mapping[str, Running]
    due_ns: int = NEVER_NS
    hold_wanted: str = ""


def initial(program: Program) -> Alarms:
    """All normal."""
    return Alarms({alarm.id: Running() for alarm in program.alarms})


def advance(
    program: Program, alarms: Alarms, conditions: Conditions, touched: Iterable[str], now_ns: int
) -> tuple[Alarms, list[Change]]:
    """Evaluate the alarms whose condition changed or whose delay has run out."""
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
    channel = conditions.channels[program.causes[alarm.id][0].index]
    if channel is not Channel.CLEAR and channel is not Channel.ACTIVE:
        return replace(state, delay=Delay(state.delay.output))
    delay = state.delay.advance(channel is Channel.ACTIVE, now_ns, alarm.on_delay_ns, alarm.off_delay_ns)
    if delay is state.delay:
        return state
    after = replace(state, delay=delay)
    if delay.output is state.delay.output:
        return after
    return _apply(alarm, after, AlarmEvent.COND_ON if delay.output else AlarmEvent.COND_OFF, now_ns, changes)


def _apply(
    alarm: Alarm, state: Running, event: AlarmEvent, now_ns: int, changes: list[Change], by: str = ""
) -> Running:
    found = move(state.state, event, latching=alarm.latching, needs_acknowledge=alarm.needs_acknowledge)
    if found.result == "ok":
        changes.append(Change(alarm, state.state, found.to, found.announce, by))
    since_ns = now_ns if state.state is AlarmState.NORMAL else state.since_ns
    return replace(state, state=found.to, since_ns=since_ns)


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
        return alarms, [], f"there is nothing to {what}" if target == "*" else f"{target} has nothing to {what}"
    return _settle(program, replace(alarms, states=states)), changes, ""


def _settle(program: Program, alarms: Alarms) -> Alarms:
    due_ns = min((_due_ns(alarm, alarms) for alarm in program.alarms), default=NEVER_NS)
    holding = (alarm.id for alarm in program.alarms if alarm.hold and alarms.states[alarm.id].delay.output)
    return replace(alarms, due_ns=due_ns, hold_wanted=next(holding, ""))


def _due_ns(alarm: Alarm, alarms: Alarms) -> int:
    return alarms.states[alarm.id].delay.due_ns(alarm.on_delay_ns, alarm.off_delay_ns)
