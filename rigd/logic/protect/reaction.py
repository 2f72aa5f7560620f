"""How fast the rig really answers, against the budget of ``rigd.logic.response``.

Measured twice. Each sample of an interlocked tag is looked at when it is judged: one that is older than its interlock's
budget allows is told at once. Each trip is timed from the sample that made it to the last pump's answer to its stop,
and to the feedback that everything stands. A broken budget is an alarm; nothing here stops or delays anything.

Not measured: the sensor's lag, the time until the next poll, and the plunger after the pump's answer. They stay in as
the files say.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.arbitration import Aspect, Memory
from rigd.logic.protect.conditions import Conditions
from rigd.logic.protect.interlocks import Change
from rigd.logic.protect.stops import Stopping
from rigd.logic.response import SHARE, Response, responses
from rigd.model.events import Event, EventKind
from rigd.model.orders import Action, Result, Stop
from rigd.model.protection import Interlock
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.model.samples import Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

PATIENCE_NS = 60_000_000_000
"""A stop that nobody has answered after this is no measurement but a failure, and told as one."""

Fields = dict[str, str | float | int | bool]


@dataclass(frozen=True, slots=True)
class Budgets:
    """What was planned: the response of each interlock, and how old [ns] a sample of a tag may be when it is judged."""

    planned: Mapping[str, Response]
    oldest_ns: Mapping[str, int]


NO_BUDGETS = Budgets({}, {})


@dataclass(frozen=True, slots=True)
class Timed:
    """A trip that is being timed: the interlock, its stop, when its sample was taken and when it was decided [ns]."""

    interlock: str
    stop: Stop
    sample_ns: int
    decided_ns: int
    answered_ns: int = 0


def budgets(rig: RigDefinition, recipe: Recipe | None, paced: bool) -> Budgets:
    """The budgets of a run; none for a paced one, whose times are not those of the wall."""
    if paced:
        return NO_BUDGETS
    planned = {one.interlock: one for one in responses(rig, recipe)}
    oldest: dict[str, int] = {}
    for lock in rig.interlocks:
        if lock.id in planned:
            spare_s = allowed_s(planned[lock.id]) - planned[lock.id].budget.total_s
            limit_ns = int((planned[lock.id].budget.exchange_s + spare_s) * 1e9)
            for tag in {cause.tag for cause in lock.causes}:
                oldest[tag] = min(oldest.get(tag, limit_ns), limit_ns)
    return Budgets(planned, oldest)


def allowed_s(planned: Response) -> float:
    """The longest response that is still fit: half the process safety time where it is known, else twice the plan."""
    if planned.safety_s is not None:
        return max(SHARE * planned.safety_s, planned.budget.total_s)
    return 2.0 * planned.budget.total_s


def late(budgets: Budgets, batch: Iterable[Sample], now_ns: int) -> str:
    """Why the budget is broken by the age of these samples; "" when it is not."""
    oldest = budgets.oldest_ns
    for sample in batch:
        limit_ns = oldest.get(sample.tag)
        if limit_ns is not None and now_ns - sample.t_ns > limit_ns:
            age_s = (now_ns - sample.t_ns) / 1e9
            return f"{sample.tag} was {age_s:.2f} s old when it was judged, the budget allows {limit_ns / 1e9:.2f} s"
    return ""


def advance(
    program: Program,
    timed: Timed | None,
    trips: Sequence[Change],
    conditions: Conditions,
    memory: Memory,
    stopping: Stopping,
    now_ns: int,
) -> tuple[Timed | None, tuple[Event, ...], str]:
    """Go on timing the trip that is being timed, or begin with the first one of this scan; see ``follow``."""
    if timed is not None:
        return follow(program, timed, memory, stopping, now_ns)
    if not trips:
        return None, (), ""
    taken = [conditions.since_ns[cause] for cause in trips[0].causes if cause in conditions.since_ns]
    return begin(trips[0].interlock, min(taken, default=now_ns), now_ns), (), ""


def begin(lock: Interlock, sample_ns: int, now_ns: int) -> Timed | None:
    """Start to time a trip; a hold is the sequence's and not timed."""
    return Timed(lock.id, lock.stop, sample_ns, now_ns) if lock.stop >= Stop.QUENCH else None


def follow(
    program: Program, timed: Timed, memory: Memory, stopping: Stopping, now_ns: int
) -> tuple[Timed | None, tuple[Event, ...], str]:
    """One scan: what goes on being timed, what was measured, and why the budget is broken ("")."""
    if not timed.answered_ns:
        answered_ns = _answered_ns(program, memory, timed)
        if answered_ns is None:
            return (timed if now_ns - timed.decided_ns < PATIENCE_NS else None), (), ""
        timed = replace(timed, answered_ns=answered_ns)
        event, broken = _measured(program, timed, now_ns)
        return (timed if timed.stop is Stop.CUT else None), (event,), broken
    if stopping.level is Stop.NONE or now_ns - timed.decided_ns > PATIENCE_NS:
        return None, (), ""
    if not stopping.done:
        return timed, (), ""
    return None, (_confirmed(timed, now_ns),), ""


def _answered_ns(program: Program, memory: Memory, timed: Timed) -> int | None:
    """When the last pump that was told to stop since the decision has agreed; ``None`` while one has not."""
    told = [memory.told.get((pump, Aspect.RATE)) for pump in program.pumps]
    mine = [one for one in told if one is not None and one.order.action is Action.STOP]
    stops = [one for one in mine if one.order.t_ns >= timed.decided_ns]
    if not stops or any(one.result is not Result.DONE for one in stops):
        return None
    return max(one.answered_ns for one in stops)


def _measured(program: Program, timed: Timed, now_ns: int) -> tuple[Event, str]:
    """The event of a timed stop, and why it breaks the budget ("")."""
    taken_s = (timed.answered_ns - timed.sample_ns) / 1e9
    decided_s = (timed.decided_ns - timed.sample_ns) / 1e9
    planned = program.budgets.planned.get(timed.interlock)
    fields: Fields = {"value": round(taken_s, 4), "unit": "s", "decided_s": round(decided_s, 4)}
    text = f"{timed.interlock}: {taken_s:.3f} s from the sample to the last pump's answer"
    text += f", {decided_s:.3f} s to the decision"
    broken = ""
    if planned is not None:
        left_out = planned.budget.sensor_lag_s + planned.budget.poll_s + planned.budget.stop_s
        plan_s, most_s = planned.budget.total_s - left_out, allowed_s(planned) - left_out
        fields |= {"planned_s": round(plan_s, 4), "allowed_s": round(most_s, 4)}
        text += f"; planned {plan_s:.3f} s, allowed {most_s:.3f} s"
        if taken_s > most_s:
            broken = f"{timed.interlock} took {taken_s:.2f} s from the sample to the pumps, allowed are {most_s:.2f} s"
    return Event(EventKind.MEASUREMENT, f"response {timed.interlock}", now_ns, f"{text}.", fields), broken


def _confirmed(timed: Timed, now_ns: int) -> Event:
    seconds = (now_ns - timed.sample_ns) / 1e9
    text = f"{timed.interlock}: {seconds:.3f} s from the sample until every pump was read to stand."
    fields: Fields = {"value": round(seconds, 4), "unit": "s"}
    return Event(EventKind.MEASUREMENT, f"confirmation {timed.interlock}", now_ns, text, fields)


def with_compliance(
    rig: RigDefinition, recipe: Recipe | None, measured_mL_bar: float, now_ns: int
) -> tuple[tuple[Event, ...], str]:
    """The time there is with the compliance as measured, and why some interlock is too slow for it ("")."""
    found = [one for one in responses(rig, recipe, measured_mL_bar) if one.safety_s is not None]
    if not found:
        return (), ""
    worst = min(found, key=lambda one: one.margin or 0.0)
    assert worst.safety_s is not None
    text = (
        f"With the measured {1000 * measured_mL_bar:.1f} uL per bar a block leaves {worst.safety_s:.2f} s from the"
        f" limit of {worst.interlock} to the weakest rating, of which half counts; it answers in"
        f" {worst.budget.total_s:.2f} s."
    )
    fields: Fields = {"value": round(worst.safety_s, 3), "unit": "s", "interlock": worst.interlock}
    event = Event(EventKind.MEASUREMENT, "process safety time", now_ns, text, fields)
    slow = (
        f"{worst.interlock} answers in {worst.budget.total_s:.2f} s; as measured only {worst.safety_s:.2f} s are there"
    )
    return (event,), "" if worst.fit else slow
