"""Snapshots and events of a run that never was, as the door sends them."""

from __future__ import annotations

from typing import Any


def value(v: float | None, unit: str, quality: str = "good", cause: str = "none", text: str = "") -> dict[str, Any]:
    return {"v": v, "q": quality, "c": cause, "u": unit, "text": text}


def snapshot(**changes: Any) -> dict[str, Any]:
    """A sweep going well on the two-pump rig."""
    values = {
        "PT-1": value(3.412, "bar"),
        "PT-2": value(2.105, "bar"),
        "TT-1": value(60.08, "degC"),
        "TT-2": value(60.2, "degC", "uncertain", "discrepant"),
        "PU-A.flow": value(1.0, "mL/min"),
        "PU-A.level": value(3.2, "mL"),
        "PU-B.flow": value(1.0, "mL/min"),
        "V-A.position": value(1, "", text="reagent"),
        "V-B.position": value(1, "", text="reagent"),
        "V-C.position": value(0, "", text="waste"),
        "CH.bath": value(61.0, "degC"),
        "CH.circulating": value(1, "", text="1"),
        "IR.conversion": value(0.372, "1"),
        "IR.acetic acid": value(0.61, "mol/L"),
        "flask.volume": value(12.3, "mL"),
        "waste.volume": value(88.0, "mL"),
    }
    base = {
        "say": "snapshot",
        "run": {
            "id": "r",
            "folder": "/x",
            "rig": "two-pump-column",
            "recipe": "demo-sweep",
            "simulated": True,
            "pace": 20.0,
        },
        "t_s": 1834.2,
        "utc": "2030-01-01T00:00:00+00:00",
        "state": "running",
        "stop": "none",
        "phase": {
            "id": "point-P03",
            "label": "Point P03",
            "point": "P03",
            "step": "settle",
            "progress": 0.4,
            "left_s": 130,
        },
        "campaign": {"done": 2, "total": 6, "left_s": 2400},
        "values": values,
        "interlocks": {"PRESSURE-HIGH": "healthy", "BED-HOT": "healthy"},
        "alarms": [],
        "prompts": [],
        "devices": {"pump-a": {"link": "online", "detail": ""}},
        "used_mL": {"solvent": 40.0},
    }
    return {**base, **changes}


def event(kind: str, subject: str, t_s: float, text: str, **fields: Any) -> dict[str, Any]:
    return {"say": "event", "n": 1, "kind": kind, "subject": subject, "t_s": t_s, "text": text, "fields": fields}


ALARM = {
    "id": "PRESSURE-RISING", "state": "unack", "priority": 2, "title": "Column pressure near its limit",
    "text": "PT-1 is 6.8 bar, above 6.5 bar.", "do": "Lower the flow or hold the run.", "since_s": 12.0,
}  # fmt: skip
