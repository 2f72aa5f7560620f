"""May this rig run this recipe with nobody there? Each requirement, whether it is met, and what to do if not.

What rules for unattended work usually ask: written approval, two people who can be reached, an end, safeguards that
were tested, somebody who is really reached by an alert (university rules named in the project's references; local rules
apply first). Pure: records and time come in.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta

from rigd.model.problems import Problem
from rigd.model.recipe import Recipe
from rigd.model.records import RecordKind, RigRecord
from rigd.model.rig import RigDefinition
from rigd.ports.door import WAKING

ALERT_HOURS = 12.0
"""A contact must have answered a test alert this recently (proposal; no source)."""


@dataclass(frozen=True, slots=True)
class Requirement:
    """One of them. ``waived`` says why it is not asked here, "" when it is."""

    id: str
    title: str
    met: bool
    found: str
    remedy: str = ""
    waived: str = ""


@dataclass(frozen=True, slots=True)
class Arming:
    """All requirements; ``overdue`` are interlocks without a proof test in date; ``left_s`` until the permit ends."""

    requirements: tuple[Requirement, ...]
    overdue: tuple[str, ...]
    left_s: float = 0.0

    @property
    def missing(self) -> tuple[Requirement, ...]:
        """What stands in the way."""
        return tuple(one for one in self.requirements if not one.met and not one.waived)

    @property
    def armed(self) -> bool:
        """True when nothing does."""
        return not self.missing

    @property
    def refusal(self) -> str:
        """Everything that stands in the way, as one sentence; "" when nothing does."""
        return "; ".join(f"{one.title}: {one.found}, so {one.remedy}" for one in self.missing)


def arming(
    rig: RigDefinition,
    recipe: Recipe,
    records: Sequence[RigRecord],
    now: datetime,
    *,
    duration_s: float,
    simulated: bool,
) -> Arming:
    """Judge. ``duration_s`` is how long the recipe will take by the wall clock; ``now`` has an offset."""
    overdue = tuple(name for name, _ in overdue_interlocks(rig, records, now))
    waived = "not asked of a simulated rig" if simulated else ""
    left_s = 0.0 if recipe.permit is None else (_time(recipe.permit.end_utc) - now).total_seconds()
    found = (
        _sheet(recipe),
        _permit(recipe),
        _contacts(recipe),
        _end(recipe, left_s, duration_s),
        _proofs(overdue, waived),
        _alerts(rig, records, now, waived),
    )
    return Arming(found, overdue, left_s)


def overdue_interlocks(
    rig: RigDefinition, records: Iterable[RigRecord], now: datetime
) -> list[tuple[str, datetime | None]]:
    """Interlocks that ask for proof tests and have none in date, with the time of the last one that passed."""
    last = {one.subject: one for one in records if one.kind is RecordKind.PROOF}
    found: list[tuple[str, datetime | None]] = []
    for lock in rig.interlocks:
        if lock.built_in or not lock.proof_interval_s:
            continue
        record = last.get(lock.id)
        at = _time(record.utc) if record is not None and record.passed else None
        if at is None or not timedelta(0) <= now - at <= timedelta(seconds=lock.proof_interval_s):
            found.append((lock.id, at))
    return found


def _time(utc: str) -> datetime:
    return datetime.fromisoformat(utc.replace("Z", "+00:00"))


def _sheet(recipe: Recipe) -> Requirement:
    title, remedy = "chemistry sheet", "let a competent person fill in [sheet] in the recipe"
    if recipe.sheet is None:
        return Requirement("sheet", title, recipe.solvent_only, "none; only solvent may run", remedy)
    return Requirement("sheet", title, True, f"signed by {recipe.sheet.signed_by}")


def _permit(recipe: Recipe) -> Requirement:
    title, permit = "approval", recipe.permit
    if permit is None:
        return Requirement("approval", title, False, "the recipe has no [permit]", "have the run approved in writing")
    return Requirement("approval", title, True, f"{permit.approved_by}, permit {permit.number}")


def _contacts(recipe: Recipe) -> Requirement:
    people = {one.strip().casefold() for one in recipe.permit.contacts} if recipe.permit else set()
    found = "; ".join(recipe.permit.contacts) if recipe.permit else "nobody is named"
    remedy = "name two people with their telephone numbers in [permit] contacts"
    return Requirement("contacts", "two contacts", len(people - {""}) >= 2, found, remedy)


def _end(recipe: Recipe, left_s: float, duration_s: float) -> Requirement:
    title = "end of the permit"
    if recipe.permit is None:
        return Requirement("end", title, False, "no end is stated", "state the end in [permit]")
    if left_s < duration_s:
        found = (
            f"{recipe.permit.end_utc}, in {left_s / 3600:.1f} h" if left_s > 0 else f"{recipe.permit.end_utc} is past"
        )
        return Requirement("end", title, False, f"{found}; the run takes {duration_s / 3600:.1f} h", "renew the permit")
    return Requirement("end", title, True, f"{recipe.permit.end_utc}; then the rig is flushed and stopped")


def _proofs(overdue: tuple[str, ...], waived: str) -> Requirement:
    found = f"overdue: {', '.join(overdue)}" if overdue else "all in date"
    remedy = "test each with a real stimulus and record it with: rigd proof RIG INTERLOCK"
    return Requirement("proof", "proof tests", not overdue, found, remedy, waived)


def _alerts(rig: RigDefinition, records: Sequence[RigRecord], now: datetime, waived: str) -> Requirement:
    title, remedy = "alert path", "send a test with: rigd alert-test RIG"
    waking = {channel.name for channel in rig.outside.channels if channel.priority_at_least >= WAKING}
    if not waking:
        found = "the rig file names no alert channel that takes urgent alerts"
        return Requirement("alert", title, False, found, "add an [[outside.alerts]] table", waived)
    answered = [_time(one.utc) for one in records if one.kind is RecordKind.ALERT_RECEIVED and one.subject in waking]
    fresh = [at for at in answered if timedelta(0) <= now - at <= timedelta(hours=ALERT_HOURS)]
    found = f"answered at {max(fresh):%Y-%m-%d %H:%M} UTC" if fresh else f"no test answered in {ALERT_HOURS:g} h"
    return Requirement("alert", title, bool(fresh), found, remedy, waived)


def as_problem(one: Requirement) -> Problem:
    """A requirement that is not met, for a list of problems."""
    return Problem("not-armed", f"{one.title}: {one.found}", one.remedy)
