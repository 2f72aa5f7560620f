"""What hides an alarm: three flags over the core machine, each a literal table, and the way back out of hiding.

Shelved (SH, by a person, timed), suppressed by design (SD, by logic), out of service (OS, by maintenance). The core
goes on underneath, so that nothing is lost while nobody is told, and two flags together cannot dead-lock. Held row by
row against tests/reference/alarm_overlay.csv and alarm_resync.csv; the shape is that of IEC 62541-9:2020.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from rigd.logic.protect import alarm_core
from rigd.logic.protect.alarm_core import AlarmEvent, AlarmState, Announce, Move


class Flag(StrEnum):
    """The flags; a later one here is shown rather than an earlier one."""

    SHELVED = "SH"
    SUPPRESSED = "SD"
    OUT_OF_SERVICE = "OS"

    @property
    def words(self) -> str:
        """The flag's name for people."""
        return _WORDS[self]


_WORDS = {
    Flag.SHELVED: "shelved",
    Flag.SUPPRESSED: "suppressed by design",
    Flag.OUT_OF_SERVICE: "out of service",
}


class FlagEvent(StrEnum):
    """What can happen to a flag; its guard in brackets."""

    SHELVE = "SHELVE"  # shelvable, a time within the longest, a reason; of one that is shelved: total time within
    UNSHELVE = "UNSHELVE"
    SHELVE_EXPIRE = "SHELVE_EXPIRE"
    SUPPRESS_LOGIC_ON = "SUPPRESS_LOGIC_ON"
    SUPPRESS_LOGIC_OFF = "SUPPRESS_LOGIC_OFF"
    REMOVE = "REMOVE"  # authorised, a reason
    RETURN = "RETURN"  # authorised


@dataclass(frozen=True, slots=True)
class Turn:
    """Whether the flag is up afterwards, and the result: ok, extended, resync, ignored or rejected."""

    up: bool
    result: str


_SH, _SD, _OS = Flag
_E = FlagEvent
_NO, _YES = Turn(False, "rejected"), Turn(True, "rejected")

TABLE: dict[tuple[Flag, bool, FlagEvent], tuple[Turn, Turn]] = {
    # (flag, up, event): (guard false, guard true); both alike where the guard does not matter
    (_SH, False, _E.SHELVE): (_NO, Turn(True, "ok")),
    (_SH, True, _E.SHELVE): (_YES, Turn(True, "extended")),
    (_SH, True, _E.UNSHELVE): (Turn(False, "resync"),) * 2,
    (_SH, False, _E.UNSHELVE): (_NO,) * 2,
    (_SH, True, _E.SHELVE_EXPIRE): (Turn(False, "resync"),) * 2,
    (_SH, False, _E.SHELVE_EXPIRE): (Turn(False, "ignored"),) * 2,
    (_SD, False, _E.SUPPRESS_LOGIC_ON): (Turn(True, "ok"),) * 2,
    (_SD, True, _E.SUPPRESS_LOGIC_ON): (Turn(True, "ignored"),) * 2,
    (_SD, True, _E.SUPPRESS_LOGIC_OFF): (Turn(False, "resync"),) * 2,
    (_SD, False, _E.SUPPRESS_LOGIC_OFF): (Turn(False, "ignored"),) * 2,
    (_OS, False, _E.REMOVE): (_NO, Turn(True, "ok")),
    (_OS, True, _E.REMOVE): (_YES,) * 2,
    (_OS, True, _E.RETURN): (_YES, Turn(False, "resync")),
    (_OS, False, _E.RETURN): (_NO,) * 2,
}

RESYNC: dict[AlarmState, tuple[AlarmState, Announce]] = {
    AlarmState.NORMAL: (AlarmState.NORMAL, Announce.NOTHING),
    AlarmState.UNACKNOWLEDGED: (AlarmState.UNACKNOWLEDGED, Announce.NEW),
    AlarmState.ACKNOWLEDGED: (AlarmState.UNACKNOWLEDGED, Announce.NEW),
    AlarmState.RETURNED: (AlarmState.RETURNED, Announce.NEW),
    AlarmState.LATCHED_UNACKNOWLEDGED: (AlarmState.LATCHED_UNACKNOWLEDGED, Announce.NEW),
    AlarmState.LATCHED_ACKNOWLEDGED: (AlarmState.LATCHED_ACKNOWLEDGED, Announce.NOTHING),
}
"""Core state and announcement when the last flag drops."""


def turn(flag: Flag, up: bool, event: FlagEvent, guard: bool = False) -> Turn:
    """What an event does to a flag. ``KeyError`` for an event that is not one of this flag."""
    return TABLE[flag, up, event][guard]


def hidden_move(state: AlarmState, event: AlarmEvent, *, latching: bool, needs_acknowledge: bool) -> Move:
    """The core's transition while a flag is up: nothing is announced, nobody can acknowledge or reset, and what nobody
    heard of needs no acknowledgement when its condition has gone."""
    if event in (AlarmEvent.ACK, AlarmEvent.RESET):
        return Move(state, Announce.NOTHING, "rejected")
    if event is AlarmEvent.REALARM:
        return Move(state, Announce.NOTHING, "ignored")
    found = alarm_core.move(state, event, latching=latching, needs_acknowledge=needs_acknowledge and latching)
    return Move(found.to, Announce.NOTHING, found.result)
