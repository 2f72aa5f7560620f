"""Protect's part of a snapshot, as plain values for a screen or for JSON."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING

from rigd.logic.protect.alarm_core import AlarmState
from rigd.logic.protect.describe import label
from rigd.logic.protect.protection import ProtectState
from rigd.model.rig import TagKind
from rigd.model.samples import Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program


def shown_state(program: Program, state: ProtectState, now_ns: int) -> dict[str, object]:
    """The keys of ``rigd.ports.door.SNAPSHOT_KEYS`` that protect knows."""
    devices = state.signals.devices
    return {
        "stop": state.verdict.stop.name.lower(),
        "values": values(program, state.signals.samples),
        "interlocks": {name: str(running.latch) for name, running in state.interlocks.states.items()},
        "alarms": standing(program, state, now_ns),
        "devices": {name: {"link": str(s.link), "detail": s.detail} for name, s in devices.items()},
        "used_mL": {liquid: round(volume, 4) for liquid, volume in state.ledger.used.items()},
    }


def standing(program: Program, state: ProtectState, now_ns: int) -> list[dict[str, object]]:
    """The alarms that are not normal, or hidden, most urgent first."""
    found = []
    for alarm in sorted(program.alarms, key=lambda alarm: alarm.priority):
        running = state.alarms.states[alarm.id]
        if running.state is not AlarmState.NORMAL or running.flag is not None:
            found.append(
                {
                    "id": alarm.id,
                    "state": running.words,
                    "hidden": running.flag is not None,
                    "priority": int(alarm.priority),
                    "title": alarm.title,
                    "text": state.early.remarks.get(alarm.condition.tag, alarm.consequence or alarm.title),
                    "do": alarm.action,
                    "since_s": (now_ns - running.since_ns) / 1e9,
                }
            )
    return found


def values(program: Program, samples: Mapping[str, Sample]) -> dict[str, dict[str, object]]:
    """The image for a screen: value, quality, cause, unit and label of every tag; unseen ones without a value."""
    shown: dict[str, dict[str, object]] = {}
    for name, tag in program.tags.items():
        sample = samples.get(name)
        if sample is None and tag.kind is TagKind.DERIVED and not tag.device:
            continue  # nothing to be read: it comes when there is something to say
        if sample is None:
            shown[name] = {"v": None, "q": "bad", "c": "never seen", "u": tag.unit, "text": ""}
            continue
        value = sample.value if math.isfinite(sample.value) else None
        shown[name] = {
            "v": value,
            "q": sample.quality.name.lower(),
            "c": str(sample.cause),
            "u": tag.unit,
            "text": "" if value is None else label(tag.labels, value),
        }
    return shown
