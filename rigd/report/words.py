"""Numbers and names as people read them, the same on the page and in the terminal."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from rigd.model.events import Event, EventKind

if TYPE_CHECKING:
    from rigd.report.data import RunData

OUTCOMES = {
    "done": "Done",
    "tripped": "Tripped",
    "stopped": "Stopped early",
    "refused": "Refused",
    "guarded": "Stopped by the guard",
    "loose": "NOT CONFIRMED AS STOPPED",
    "running": "Running",
}

CAUTIONS = (
    "rigd is not a safety function and claims no safety integrity; it can fail at the moment it is needed.",
    "Every rig needs a mechanical relief device, a hard-wired switch that takes the power from pumps and heaters.",
    "Heaters need an over-temperature cut-out of their own. This report proves none of these devices.",
    "Limits in the example files are examples: commission with solvent, prove each interlock with a real stimulus.",
    "The hazards of the chemistry are for a competent person to judge; local rules for unattended work apply first.",
    "What no sensor shows, no software detects.",
)


def duration(seconds: float) -> str:
    """``7 h 42 min``, ``12 min 05 s``, ``31 s``; a dash for what is not known.

    >>> duration(725), duration(27720), duration(31.4)
    ('12 min 05 s', '7 h 42 min', '31 s')
    """
    if not math.isfinite(seconds):
        return "–"
    whole = round(seconds)
    hours, minutes = whole // 3600, whole % 3600 // 60
    if hours:
        return f"{hours} h {minutes:02d} min"
    return f"{minutes} min {whole % 60:02d} s" if minutes else f"{whole} s"


def clock(seconds: float) -> str:
    """Process time as ``h:mm:ss``.

    >>> clock(3725.2)
    '1:02:05'
    """
    if not math.isfinite(seconds):
        return "–"
    whole = int(seconds)
    return f"{whole // 3600}:{whole % 3600 // 60:02d}:{whole % 60:02d}"


def utc(text: str) -> str:
    """A wall time to the second, without its offset (the heading says UTC)."""
    return text[:19].replace("T", " ") or "–"


def simulated(facts: Mapping[str, str]) -> bool:
    """What the journal's facts say about it."""
    return facts.get("simulated", "").lower() in ("yes", "true", "1", "simulated")


def number(value: float, digits: int = 2) -> str:
    """Fixed decimals; a dash for NaN."""
    return f"{value:.{digits}f}" if math.isfinite(value) else "–"


def percent(value: float, scatter: float = math.nan) -> str:
    """A fraction and its standard deviation in per cent (the sign is in the heading), both to the second digit of the
    deviation, at most to a thousandth of a per cent.

    >>> percent(0.634, 0.0123), percent(0.273304, 0.0000812), percent(0.634)
    ('63.4 ± 1.2', '27.330 ± 0.008', '63.4')
    """
    if not math.isfinite(value):
        return "–"
    if not math.isfinite(scatter):
        return f"{100 * value:.1f}"
    digits = min(3, max(1, 1 - math.floor(math.log10(100 * scatter)))) if scatter > 0 else 1
    return f"{100 * value:.{digits}f} ± {100 * scatter:.{digits}f}"


def outcome_words(run: RunData) -> str:
    """The outcome as a heading."""
    return OUTCOMES.get(run.outcome, run.outcome.capitalize())


def points_words(run: RunData) -> str:
    """``5 of 6 points collected``; those of the run that this one went on from count and are told."""
    collected = {point.id for point in run.points if point.status == "collected"}
    before = [name for name in earlier_points(run) if name not in collected]
    planned = len(run.recipe.points) if run.recipe else len({*before, *(point.id for point in run.points)})
    source = run.facts.get("earlier", "") or "an earlier run"
    note = f" ({len(before)} of them by {source})" if before else ""
    return f"{len(collected) + len(before)} of {planned} points collected{note}"


def earlier_points(run: RunData) -> list[str]:
    """Ids of the points that the run left out, because an earlier one had collected them."""
    try:
        found = json.loads(run.facts.get("collected", "[]"))
    except ValueError:
        return []
    return [str(name) for name in found] if isinstance(found, list) else []


def of_kind(run: RunData, *kinds: EventKind) -> list[Event]:
    """Events of some kinds, in order."""
    return [event for event in run.events if event.kind in kinds]


def first_out(trips: Sequence[Event]) -> Event | None:
    """The trip that came first, as the interlocks recorded it; the earliest when none is marked."""
    marked = [event for event in trips if event.fields.get("first_out") in (True, event.subject)]
    return next(iter(marked or trips), None)


def trip_groups(trips: Sequence[Event]) -> list[tuple[Event, list[Event]]]:
    """Each first-out with the trips that followed from it, until the next one after a reset."""
    groups: list[tuple[Event, list[Event]]] = []
    for event in trips:
        if not groups or event.fields.get("first_out") in (True, event.subject):
            groups.append((event, []))
        else:
            groups[-1][1].append(event)
    return groups


def followers_words(first: Event, after: Sequence[Event]) -> str:
    """``3 more followed within 0.4 s: A, B, C``; "" for none."""
    if not after:
        return ""
    within_s = (after[-1].t_ns - first.t_ns) / 1e9
    span = f"{within_s:.1f} s" if within_s < 60 else duration(within_s)
    return f"{len(after)} more followed within {span}: {', '.join(event.subject for event in after)}"


def flow_words(flows_mL_min: dict[str, float]) -> str:
    """``PU-A 0.40 + PU-B 0.40``."""
    return " + ".join(f"{pump} {flow:.3g}" for pump, flow in flows_mL_min.items())
