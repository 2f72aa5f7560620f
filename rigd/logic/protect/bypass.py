"""Timed bypass of one interlock: who may have it, and its end.

Ideas of IEC 61511-1:2016 cl. 11.7 and 16.2 (clauses from memory): a person, a reason, a time limit on the monotonic
clock, never both of a pair, never when nobody is there, gone after a restart. Interlocks are partners when they watch
the same quantity (two on pressure, two on temperature): while one is bypassed or tripped, the other may not be.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import Conditions
from rigd.logic.protect.interlocks import Bypass, Change, Interlocks, ballot, settle
from rigd.logic.protect.latch import LatchEvent, LatchState, move
from rigd.model.orders import Request
from rigd.model.protection import Interlock

if TYPE_CHECKING:
    from rigd.logic.program import Program

LONGEST_S = 8 * 3600.0
"""No bypass is granted for longer (proposal; one working day, no source)."""


def grant(
    program: Program, interlocks: Interlocks, conditions: Conditions, request: Request, now_ns: int
) -> tuple[Interlocks, list[Change], str]:
    """Bypass the interlock that the request names. Returns the refusal, "" when granted."""
    interlock = find(program, request.target)
    if interlock is None:
        return interlocks, [], f"there is no interlock {request.target!r}"
    state = interlocks.states[interlock.id]
    refusal = _refusal(program, interlocks, interlock, request)
    refusal = move(state.latch, LatchEvent.BYP_ON, guard=True).rejected or refusal
    if not refusal and ballot(program, interlock, conditions, interlocks.running, state).demand:
        refusal = "its cause is present"
    if refusal:
        return interlocks, [], f"{interlock.id}: {refusal}"
    until_ns = now_ns + int(duration_s(request) * 1e9)
    reason = str(request.args["reason"])
    after = move(state.latch, LatchEvent.BYP_ON, guard=True).to
    note = f"bypassed by {request.who} for {duration_s(request):g} s: {reason}"
    change = Change(interlock, state.latch, after, LatchEvent.BYP_ON, note=note)
    bypassed = replace(state, latch=after, bypass=Bypass(request.who, reason, until_ns))
    states = {**interlocks.states, interlock.id: bypassed}
    return settle(program, replace(interlocks, states=states)), [change], ""


def end(program: Program, interlocks: Interlocks, request: Request, now_ns: int) -> tuple[Interlocks, str]:
    """Let a bypass end in this scan. Returns the refusal, "" when it is ending."""
    interlock = find(program, request.target)
    if interlock is None:
        return interlocks, f"there is no interlock {request.target!r}"
    state = interlocks.states[interlock.id]
    if state.bypass is None:
        return interlocks, f"{interlock.id} is not bypassed"
    ended = replace(state.bypass, until_ns=now_ns, ended_by=request.who or "somebody")
    states = {**interlocks.states, interlock.id: replace(state, bypass=ended)}
    return settle(program, replace(interlocks, states=states)), ""


def find(program: Program, name: str) -> Interlock | None:
    """The interlock of this id."""
    return next((interlock for interlock in program.interlocks if interlock.id == name), None)


def _refusal(program: Program, interlocks: Interlocks, interlock: Interlock, request: Request) -> str:
    if interlock.built_in:
        return "it is built in and is never bypassed"
    if program.options.unattended:
        return "no bypass is granted in an unattended run"
    if not request.who.strip():
        return "a bypass needs the name of the person who asks for it"
    if not str(request.args.get("reason", "")).strip():
        return "a bypass needs a reason"
    if not 0.0 < duration_s(request) <= LONGEST_S:
        return f"a bypass needs a duration of at most {LONGEST_S:g} s"
    for partner in partners(program, interlock):
        if interlocks.states[partner.id].latch is not LatchState.HEALTHY:
            return f"its partner {partner.id} is not healthy"
    return ""


def duration_s(request: Request) -> float:
    """Duration that a request asks for [s]; 0 when it is missing, not a number or not finite."""
    try:
        found = float(request.args.get("duration_s", 0.0))
    except ValueError:
        return 0.0
    return found if math.isfinite(found) else 0.0


def partners(program: Program, interlock: Interlock) -> tuple[Interlock, ...]:
    """The other interlocks that a person declared and that watch the same quantity."""
    own = _quantities(program, interlock)
    others = (other for other in program.interlocks if not other.built_in and other.id != interlock.id)
    return tuple(other for other in others if own & _quantities(program, other))


def _quantities(program: Program, interlock: Interlock) -> set[str]:
    tags = (program.tags.get(cause.tag) for cause in interlock.causes)
    return {tag.measures for tag in tags if tag is not None}
