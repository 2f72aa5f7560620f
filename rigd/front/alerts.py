"""Which events become alerts, and in what words. Pure.

An alert says what happened, the value and the limit, what the rig did and what the person should do; it names the rig
and the run, and says so when the rig is simulated. It carries the head of the journal's chain of hashes, so that a
record that is written anew afterwards can be told. A sleeping person is woken by priority 1 and 2 only (advice of
ANSI/ISA-18.2 on few, meaningful priorities; the wording is ours).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

PRIORITY_NAMES = {1: "highest", 2: "high", 3: "medium", 4: "low"}


@dataclass(frozen=True, slots=True)
class Alert:
    """One message to people. ``id`` is unique in a run, so that a doubled delivery can be told."""

    id: str
    priority: int
    title: str
    text: str
    event: Mapping[str, Any]


def alert_of(event: Mapping[str, Any], rig: str, simulated: bool) -> Alert | None:
    """The alert for a door event (keys n, kind, subject, text, fields), or ``None`` when nobody need hear."""
    priority = _priority(event)
    if priority is None:
        return None
    mark = "SIMULATED " if simulated else ""
    title = f"{mark}{rig}: {_headline(event)}"
    return Alert(f"{event.get('run', '')}-{event['n']}", priority, title, _body(event), event)


def _priority(event: Mapping[str, Any]) -> int | None:
    kind, fields = event["kind"], event.get("fields", {})
    if kind == "trip":
        return 1
    if kind == "alarm":
        annunciated = fields.get("announce") in {"new", "again"}
        return int(fields.get("priority", 3)) if annunciated else None
    if kind == "fault":
        return 2
    if kind == "prompt":
        return 3 if fields.get("status") == "open" else None
    if kind == "run state" and event["subject"] in {"complete", "stopped", "aborted", "held"}:
        return 3
    return None


def _headline(event: Mapping[str, Any]) -> str:
    kind, subject = event["kind"], event["subject"]
    if kind == "trip":
        return f"TRIP {subject}"
    if kind == "alarm":
        return f"alarm {subject}"
    return f"{kind} {subject}"


def _body(event: Mapping[str, Any]) -> str:
    fields = event.get("fields", {})
    lines = [str(event["text"])]
    if "value" in fields and "limit" in fields:
        unit = fields.get("unit", "")
        lines.append(f"Value {_number(fields['value'])} {unit}, limit {_number(fields['limit'])} {unit}.")
    if fields.get("did"):
        lines.append(f"The rig did: {fields['did']}")
    if fields.get("do"):
        lines.append(f"You should: {fields['do']}")
    if event.get("utc"):
        lines.append(f"At {event['utc']}.")
    if record := event.get("record"):
        lines.append(f"Record {record[0]}: {record[1]}")
    return "\n".join(dict.fromkeys(line for line in lines if line))


def _number(value: object) -> str:
    return f"{value:.4g}" if isinstance(value, float) else str(value)
