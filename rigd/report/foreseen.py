"""What a rehearsal says would go wrong: trips, waits, alarms, points that do not get steady, what the plan found."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from rigd.model.events import Event, EventKind
from rigd.model.problems import Problem, Severity
from rigd.report.alarm_load import TOLD
from rigd.report.data import RunData
from rigd.report.words import clock, followers_words, of_kind, trip_groups

HELD = "HELD"


def foreseen(run: RunData, problems: Iterable[Problem] = ()) -> list[str]:
    """One line each, gravest first; empty when nothing would. ``problems``: those of the plan, without its notes."""
    plan = (f"{one.message}; {one.remedy}" for one in problems if one.severity is not Severity.NOTE)
    return [*_trips(run), *_waits(run), *_alarms(run), *_points(run), *plan]


def _trips(run: RunData) -> Iterator[str]:
    for first, after in trip_groups(of_kind(run, EventKind.TRIP)):
        more = f" ({followers_words(first, after)})" if after else ""
        yield f"{first.subject} would trip at {clock(first.t_ns / 1e9)}: {first.text}{more}"


def _waits(run: RunData) -> Iterator[str]:
    for event in of_kind(run, EventKind.RUN_STATE):
        if event.subject == HELD:
            yield f"it would wait for a person at {clock(event.t_ns / 1e9)}: {event.text}"


def _alarms(run: RunData) -> Iterator[str]:
    told: dict[str, list[Event]] = {}
    for event in of_kind(run, EventKind.ALARM):
        if event.fields.get("announce") in TOLD:
            told.setdefault(event.subject, []).append(event)
    for name, events in told.items():
        times = "once" if len(events) == 1 else f"{len(events)} times, first"
        yield f"alarm {name} would be told {times} at {clock(events[0].t_ns / 1e9)}: {events[0].text}"


def _points(run: RunData) -> Iterator[str]:
    for point in run.points:
        if point.status and not point.settled:
            yield f"{point.id} would {'be cut short' if point.cut_short else 'not be steady in its time'}"
