"""Fronts of new liquid on their way, and the events when one arrives somewhere."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.logic.conduct.layout import UNKNOWN, Layout, liquid_of
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.conduct.wants import event
from rigd.logic.estimators import Front
from rigd.model.events import Event, EventKind


@dataclass(frozen=True, slots=True)
class Fronts:
    """``pending``: fronts that have left a syringe and not reached their merge; ``known``: the last front per pump.

    ``merged_mL``: volume through the last section when the last of the fronts arrived (``None``: none is under way);
    ``places`` what it has still to pass.
    """

    pending: Mapping[str, Front] = field(default_factory=dict)
    known: Mapping[str, Front] = field(default_factory=dict)
    merged_mL: float | None = None
    places: tuple[str, ...] = ()


def follow(
    fronts: Fronts, layout: Layout, tracks: Mapping[str, PumpTrack], now_ns: int
) -> tuple[Fronts, tuple[Event, ...]]:
    """Move all fronts on to now."""
    pending, known = dict(fronts.pending), dict(fronts.known)
    events: list[Event] = []
    for name, track in tracks.items():
        if track.front is not known.get(name):
            known[name] = track.front
            if track.t_ns > 0 and track.front.liquid != UNKNOWN:
                pending[name] = track.front
    arrived = [name for name, front in pending.items() if _at_merge(layout, name, front, tracks[name], now_ns)]
    for name in arrived:
        events.append(_merge_event(layout, name, pending.pop(name), now_ns))
    passed_mL = _passed_mL(layout, tracks, now_ns)
    merged_mL, places = fronts.merged_mL, fronts.places
    if any(_counts(known[name]) for name in arrived) and not any(_moving(tracks[name]) for name in pending):
        merged_mL, places = passed_mL, _places(layout)
    if merged_mL is not None:
        places, more = _along(layout, places, passed_mL - merged_mL, now_ns)
        events += more
        merged_mL = merged_mL if places else None
    return Fronts(pending, known, merged_mL, places), tuple(events)


def _counts(front: Front) -> bool:
    """Rinses are only the forerunners of a front."""
    return "~" not in front.liquid


def _moving(track: PumpTrack) -> bool:
    return track.flow_mL_min > 0


def _at_merge(layout: Layout, name: str, front: Front, track: PumpTrack, now_ns: int) -> bool:
    return front.to_merge_mL(layout.pumps[name].feed, track.delivered_at(now_ns)) <= 0.0


def _merge_event(layout: Layout, name: str, front: Front, now_ns: int) -> Event:
    feed = layout.pumps[name].feed
    liquid = liquid_of(front.liquid)
    text = f"The front of {liquid} from {name} is at {feed.merge}."
    kind = "rinse" if "~" in front.liquid else "front"
    volume_mL = round(feed.outlet_mL, 4)
    return event(EventKind.FRONT, name, now_ns, text, place=feed.merge, volume_mL=volume_mL, liquid=liquid, kind=kind)


def _passed_mL(layout: Layout, tracks: Mapping[str, PumpTrack], now_ns: int) -> float:
    last = layout.path.sections[-1] if layout.path.sections else None
    return sum(tracks[pump].delivered_at(now_ns) for pump in last.pumps) if last else 0.0


def _start_mL(layout: Layout) -> float:
    """Where on the trunk the last streams join."""
    return sum(section.volume_mL for section in layout.path.sections[:-1])


def _places(layout: Layout) -> tuple[str, ...]:
    """Columns, cells and the outlet valve that lie behind the last merge."""
    start_mL = _start_mL(layout)
    parts = [s.id for s in layout.path.trunk if s.kind in ("column", "cell")]
    valve = (layout.path.outlet_valve,) if layout.path.outlet_valve else ()
    return (*(part for part in parts if layout.path.to_part_mL(part) >= start_mL), *valve)


def _along(
    layout: Layout, places: tuple[str, ...], travelled_mL: float, now_ns: int
) -> tuple[tuple[str, ...], list[Event]]:
    events = []
    start_mL = _start_mL(layout)
    while places and travelled_mL >= layout.path.to_part_mL(places[0]) - start_mL:
        at_mL = layout.path.to_part_mL(places[0])
        text = f"The merged front is at {places[0]}."
        events.append(event(EventKind.FRONT, "merged", now_ns, text, place=places[0], volume_mL=round(at_mL, 4)))
        places = places[1:]
    return places, events
