"""What the channels of one interlock say together: votes, bad channels, and partners that disagree.

Of partners that disagree the worse one is believed: a channel that disagrees with all the others counts as bad, except
that one channel always stays in the vote. A start-up override hides limits, never a bad channel.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.voting import Rule, rule
from rigd.model.protection import Armed, Interlock, OnBad

if TYPE_CHECKING:
    from rigd.logic.program import Program


@dataclass(frozen=True, slots=True)
class Vote:
    """What the channels of one interlock say now."""

    demand: bool
    protected: bool
    rule: Rule
    causes: tuple[int, ...]  # oldest first
    bad: tuple[int, ...] = ()
    unknown: tuple[str, ...] = ()


def vote(
    program: Program,
    interlock: Interlock,
    conditions: Conditions,
    *,
    running: bool,
    discord: bool = False,
    overridden: bool = False,
) -> Vote:
    """Count the channels of an interlock by its voting. ``discord``: its partners have disagreed for too long;
    ``overridden``: the start-up override counts."""
    channels = conditions.channels
    active, bad, unknown = [], [], []
    for watch in program.causes[interlock.id][: len(interlock.causes)]:
        found = channels[watch.index]
        if found is Channel.ACTIVE:
            active.append(watch.index)
        elif found is Channel.UNKNOWN:
            unknown.append(watch.tag or watch.condition.tag)
        elif found is not Channel.CLEAR:
            bad.append(watch.index)
    lost = len(bad)
    if discord:
        alone, witnesses = _discordant(program, interlock, conditions, {*active, *bad})
        lost += alone
        bad += witnesses if alone else []
    if overridden:
        active = []
    left = rule(interlock.votes, len(interlock.causes), lost, interlock.on_bad)
    armed = running or interlock.armed is Armed.ALWAYS
    protected = left.need is not None
    causes = active + (bad if interlock.on_bad is OnBad.TRIP or not protected else [])
    demand = armed and bool(causes) and (not protected or left.demands(len(active)))
    causes.sort(key=lambda cause: conditions.since_ns.get(cause, 0))
    return Vote(demand, protected, left, tuple(causes), tuple(bad), tuple(unknown))


def _discordant(
    program: Program, interlock: Interlock, conditions: Conditions, spoken_for: set[int]
) -> tuple[int, list[int]]:
    """How many channels disagree with all the others and neither demand a trip nor are bad already, and the witnesses
    of that. When every channel disagrees with every other, one is believed."""
    watches = program.causes[interlock.id]
    votes, witnesses = watches[: len(interlock.causes)], watches[len(interlock.causes) :]
    against = [watch for watch in witnesses if conditions.channels[watch.index] is Channel.ACTIVE]
    pairs = {frozenset((watch.tag, watch.condition.reference)) for watch in against}
    tags = {watch.tag for watch in votes}
    alone = [w for w in votes if all(frozenset((w.tag, other)) in pairs for other in tags - {w.tag})]
    free = [watch for watch in alone if watch.index not in spoken_for]
    count = len(free) - 1 if len(free) == len(votes) else len(free)
    return count, [watch.index for watch in against]
