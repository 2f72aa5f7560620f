"""The record of every change of an alarm: what ISA-18.2 practice asks to keep of it (list of the project, from memory).

What is the same for all of a run stands once beside them: run, boot, digest of the files.
"""

from __future__ import annotations

from bisect import bisect_right
from collections import Counter
from dataclasses import asdict, dataclass

from rigd.model.events import Event, EventKind
from rigd.report.data import RunData

PRIORITIES = {1: "highest", 2: "high", 3: "medium", 4: "low"}


@dataclass(frozen=True, slots=True)
class AlarmRecord:
    """One change.

    ``t_s`` is process time (monotonic), ``utc`` the wall's; ``limit``, ``deadband`` and delays are those in force;
    ``step`` is the phase of the recipe; ``by`` the person, or "" for the daemon; ``hidden`` the state behind a flag
    that hides it; ``left_s`` how long a shelving still lasts.
    """

    t_s: float
    utc: str
    alarm: str
    type: str
    priority: str
    before: str
    after: str
    event: str
    told: str
    tag: str
    value: str
    unit: str
    quality: str
    limit: str
    deadband: str
    on_delay_s: str
    off_delay_s: str
    step: str
    by: str
    reason: str
    hidden: str
    left_s: str


def alarm_records(run: RunData) -> tuple[AlarmRecord, ...]:
    """All changes of alarms in order, rejected ones of persons included in the requests of the run."""
    starts = [phase.start_s for phase in run.phases]
    labels = [phase.label for phase in run.phases]
    return tuple(
        _record(run, event, _at(starts, labels, event.t_ns / 1e9))
        for event in run.events
        if event.kind is EventKind.ALARM
    )


def _record(run: RunData, event: Event, step: str) -> AlarmRecord:
    fields = {key: _text(value) for key, value in event.fields.items()}
    same = ("type", "event", "tag", "value", "unit", "quality", "limit", "deadband", "on_delay_s", "off_delay_s")
    kept = {name: fields.get(name, "") for name in (*same, "by", "reason", "hidden", "left_s")}
    return AlarmRecord(
        t_s=round(event.t_ns / 1e9, 3),
        utc=run.walls.get(event.t_ns, ""),
        alarm=event.subject,
        priority=PRIORITIES.get(int(event.fields.get("priority", 0)), ""),
        before=fields.get("from", ""),
        after=fields.get("state", ""),
        told=fields.get("announce", ""),
        step=step,
        **kept,
    )


def _text(value: str | float | int | bool) -> str:
    return f"{value:.6g}" if isinstance(value, float) else str(value)


def _at(starts: list[float], labels: list[str], t_s: float) -> str:
    index = bisect_right(starts, t_s)
    return labels[index - 1] if index else ""


def record_facts(run: RunData) -> dict[str, object]:
    """The records for programs, with what is the same for all of them and how often each channel took an alert."""
    told = Counter((one.get("channel", ""), one["outcome"]) for one in run.alerts)
    return {
        "run": run.id,
        "boot": run.facts.get("boot_id", ""),
        "rig_digest": run.facts.get("rig_digest", ""),
        "records": [asdict(record) for record in alarm_records(run)],
        "attempts": [{"channel": name, "outcome": outcome, "number": n} for (name, outcome), n in sorted(told.items())],
    }
