"""The core machine of an alarm, states A to F, as a literal table.

States and events as in ANSI/ISA-18.2-2016 and IEC 62682; held row by row against tests/reference/alarm_core.csv.
COND_ON comes after the on-delay, COND_OFF after deadband and off-delay. What hides an alarm is another matter
(``rigd.logic.protect.alarm_overlay``).
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


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
