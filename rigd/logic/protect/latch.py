"""The latch of one interlock as a literal table, held row by row against tests/reference/interlock.csv.

House rules: a cause that clears changes nothing but the wish for a reset; a reset gives permission and moves nothing;
start-up is a trip; a bypass never starts out of a trip and never outlives its time. Run permission is off in every
state but ``HEALTHY`` and ``BYPASSED``.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class LatchState(StrEnum):
    """State of one interlock."""

    INIT = "init"
    HEALTHY = "healthy"
    TRIPPED_ACTIVE = "tripped active"
    TRIPPED_CLEAR = "tripped clear"
    BYPASSED = "bypassed"

    @property
    def permits(self) -> bool:
        """True when this interlock lets the rig run."""
        return self is LatchState.HEALTHY or self is LatchState.BYPASSED


class LatchEvent(StrEnum):
    """What can happen to an interlock."""

    DEMAND = "DEMAND"  # the vote asks for a trip
    CLEAR = "CLEAR"  # no cause for the clear delay
    RESET = "RESET"  # guard: authorised
    BYP_ON = "BYP_ON"  # guard: authorised, timed, partner healthy, attended
    BYP_END = "BYP_END"  # expiry or cancel; guard: cause present
    BAD = "BAD"  # no healthy channel able to trip
    PWR = "PWR"  # process start


@dataclass(frozen=True, slots=True)
class Move:
    """Where an event leads; ``rejected`` is set when a request was turned down, and says why."""

    to: LatchState
    rejected: str = ""


_H, _A, _C, _B = LatchState.HEALTHY, LatchState.TRIPPED_ACTIVE, LatchState.TRIPPED_CLEAR, LatchState.BYPASSED
_E = LatchEvent

_NOT_OUT_OF_A_TRIP = "a bypass cannot be set while the interlock is tripped"

TABLE: dict[tuple[LatchState, LatchEvent], tuple[Move, Move]] = {
    # (from, event): (guard false, guard true); both alike where the guard does not matter
    (_H, _E.DEMAND): (Move(_A), Move(_A)),
    (_H, _E.BAD): (Move(_A), Move(_A)),
    (_H, _E.CLEAR): (Move(_H), Move(_H)),
    (_H, _E.RESET): (Move(_H, "there is nothing to reset"),) * 2,
    (_H, _E.BYP_ON): (Move(_H, "the bypass is not allowed"), Move(_B)),
    (_H, _E.BYP_END): (Move(_H), Move(_H)),
    (_A, _E.DEMAND): (Move(_A), Move(_A)),
    (_A, _E.BAD): (Move(_A), Move(_A)),
    (_A, _E.CLEAR): (Move(_C), Move(_C)),
    (_A, _E.RESET): (Move(_A, "its cause is still present"),) * 2,
    (_A, _E.BYP_ON): (Move(_A, _NOT_OUT_OF_A_TRIP),) * 2,
    (_A, _E.BYP_END): (Move(_A), Move(_A)),
    (_C, _E.DEMAND): (Move(_A), Move(_A)),
    (_C, _E.BAD): (Move(_A), Move(_A)),
    (_C, _E.CLEAR): (Move(_C), Move(_C)),
    (_C, _E.RESET): (Move(_C, "the reset is not authorised"), Move(_H)),
    (_C, _E.BYP_ON): (Move(_C, _NOT_OUT_OF_A_TRIP),) * 2,
    (_C, _E.BYP_END): (Move(_C), Move(_C)),
    (_B, _E.DEMAND): (Move(_B), Move(_B)),
    (_B, _E.BAD): (Move(_B), Move(_B)),
    (_B, _E.CLEAR): (Move(_B), Move(_B)),
    (_B, _E.RESET): (Move(_B, "it is bypassed, not tripped"),) * 2,
    (_B, _E.BYP_ON): (Move(_B, "it is bypassed already; a longer bypass is a new request after this one ends"),) * 2,
    (_B, _E.BYP_END): (Move(_H), Move(_A)),
}


def move(state: LatchState, event: LatchEvent, guard: bool = False) -> Move:
    """The transition for an event. ``PWR`` leads to ``TRIPPED_CLEAR`` from everywhere, whatever was bypassed."""
    if event is LatchEvent.PWR:
        return Move(LatchState.TRIPPED_CLEAR)
    return TABLE[state, event][guard]
