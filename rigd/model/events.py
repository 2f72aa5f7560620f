"""What happened, for the journal, the screen and the alerts.

One flat record type: a kind, a subject, a sentence for people and plain fields for programs. Flat because every
reader (journal, door, MQTT, report, replay) needs all kinds, and because a comparison of two runs is then a comparison
of lists.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum


class EventKind(StrEnum):
    """The kinds of event; each names what ``subject`` is and the fields that are always there."""

    RUN_STATE = "run state"  # subject: run state entered; from, by
    PHASE = "phase"  # subject: phase id; step, point (or ""), label
    POINT = "point"  # subject: point id; status started|settled|collecting|collected|abandoned|unsettled, values
    TRIP = "trip"  # subject: interlock; first_out, tag, value, limit, unit, stop, did, do
    INTERLOCK = "interlock"  # subject: interlock; state, from
    ALARM = "alarm"  # subject: alarm; state, from, event, priority, tag, value, quality, limit, unit, do, announce, by
    STOP = "stop"  # subject: cut|quench|hold|none; cause
    REQUEST = "request"  # subject: verb; request_id, who, result accepted|refused, detail
    PROMPT = "prompt"  # subject: prompt id; text, status open|confirmed|withdrawn, who
    DEVICE = "device"  # subject: device; link, detail
    ORDER = "order"  # subject: unit; number, result, detail (only outcomes that are not done)
    VALVE = "valve"  # subject: valve; position
    REFILL = "refill"  # subject: pump; status
    FRONT = "front"  # subject: pump or "merged"; place, volume_mL
    MEASUREMENT = "measurement"  # subject: what was measured (compliance, leak rate); value, unit
    FAULT = "fault"  # subject: internal fault (conduct error, scan late); detail
    NOTE = "note"  # subject: free


@dataclass(frozen=True, slots=True)
class Event:
    """One thing that happened at ``t_ns``; ``text`` is a whole sentence a person can act on."""

    kind: EventKind
    subject: str
    t_ns: int
    text: str
    fields: Mapping[str, str | float | int | bool] = field(default_factory=dict)
