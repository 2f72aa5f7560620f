"""What a rehearsal showed beyond its outcome: a bar per phase beside its plan, vessels, and peaks against ratings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from rich import box
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from rigd.logic.planning import Plan
from rigd.model.events import EventKind
from rigd.model.protection import ConditionKind
from rigd.model.rig import RigDefinition, TagKind, VesselRole
from rigd.report.data import RunData
from rigd.report.foreseen import foreseen
from rigd.report.words import clock, duration, number

BAR = 36
"""Characters of the whole run in the bars."""

_MEASURED = ("pressure", "temperature")


@dataclass(frozen=True, slots=True)
class Stretch:
    """A phase or point with all its steps: from when to when [s of process time], and how many fillings it took."""

    id: str
    start_s: float
    end_s: float
    refills: int


def stretches(run: RunData) -> list[Stretch]:
    """Steps that belong together, in order."""
    found: list[Stretch] = []
    for span in run.phases:
        if found and found[-1].id == span.id:
            found[-1] = Stretch(span.id, found[-1].start_s, span.end_s, 0)
        else:
            found.append(Stretch(span.id, span.start_s, span.end_s, 0))
    return [Stretch(one.id, one.start_s, one.end_s, _refills(run, one.start_s, one.end_s)) for one in found]


def _refills(run: RunData, start_s: float, end_s: float) -> int:
    times = [e.t_ns / 1e9 for e in run.events if e.kind is EventKind.REFILL and e.fields.get("status") == "done"]
    return sum(start_s <= t_s < end_s for t_s in times)


def bar(start_s: float, end_s: float, whole_s: float, width: int = BAR) -> str:
    """Where a stretch lies in the whole; at least one character.

    >>> bar(0, 50, 100, 4), bar(99, 100, 100, 4)
    ('██··', '···█')
    """
    first = min(int(width * start_s / whole_s), width - 1)
    last = max(first + 1, min(width, round(width * end_s / whole_s)))
    return "·" * first + "█" * (last - first) + "·" * (width - last)


def rehearsal_view(
    run: RunData, planned: Plan, peak: Mapping[str, float], vessels_mL: Mapping[str, float]
) -> RenderableType:
    """Timeline, vessels and peaks of a dry run; ``vessels_mL`` is what they held at its end."""
    assert run.rig is not None, "a rehearsal knows its rig"
    parts: list[RenderableType] = [_timeline(run, planned), _vessels(run.rig, vessels_mL), _peaks(run.rig, peak)]
    parts += [Text(f"! {line}", style="yellow") for line in foreseen(run, planned.problems)]
    return Group(*parts)


def _timeline(run: RunData, planned: Plan) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("phase")
    table.add_column("start", justify="right")
    table.add_column(f"timeline of {duration(run.duration_s)}", no_wrap=True)
    for heading in ("took", "planned", "refills"):
        table.add_column(heading, justify="right")
    expected = {phase.id: phase.duration_s for phase in planned.phases}
    for one in stretches(run):
        style = "cyan" if one.id.startswith("point") else "dim"
        shown = Text(bar(one.start_s, one.end_s, max(run.duration_s, 1.0)), style=style)
        plan_s = expected.get(one.id, float("nan"))
        took = duration(one.end_s - one.start_s)
        table.add_row(one.id, clock(one.start_s), shown, took, duration(plan_s), str(one.refills or ""))
    return table


def _vessels(rig: RigDefinition, vessels_mL: Mapping[str, float]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("vessel")
    for heading in ("before mL", "used mL", "received mL", "at the end mL", "capacity mL"):
        table.add_column(heading, justify="right")
    for vessel in rig.vessels:
        end_mL = vessels_mL.get(vessel.id, vessel.content_mL)
        change_mL = end_mL - vessel.content_mL
        supply = vessel.role is VesselRole.SUPPLY
        name = f"{vessel.id} ({vessel.liquid})" if vessel.liquid else vessel.id
        used, received = (number(-change_mL, 1), "") if supply else ("", number(change_mL, 1))
        bad = end_mL < 0 or end_mL > vessel.capacity_mL
        row = (name, number(vessel.content_mL, 1), used, received, number(end_mL, 1), number(vessel.capacity_mL, 0))
        table.add_row(*row, style="red" if bad else None)
    return table


def _peaks(rig: RigDefinition, peak: Mapping[str, float]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("peak of")
    for heading in ("value", "trips at", "rating", "of the rating"):
        table.add_column(heading, justify="right")
    for tag in rig.tags:
        if tag.measures not in _MEASURED or tag.id not in peak or tag.kind is not TagKind.MEASURED:
            continue
        causes = [cause for lock in rig.interlocks for cause in lock.causes]
        limits = [cause.limit for cause in causes if cause.tag == tag.id and cause.kind is ConditionKind.HIGH]
        unit = tag.unit.replace("deg", "°")
        limit = f"{min(limits):g} {unit}" if limits else "–"
        rating = f"{tag.rating:g} {unit}" if tag.rating else "–"
        part = f"{100 * peak[tag.id] / tag.rating:.0f} %" if tag.rating else "–"
        table.add_row(tag.title or tag.id, f"{peak[tag.id]:.2f} {unit}", limit, rating, part)
    return table
