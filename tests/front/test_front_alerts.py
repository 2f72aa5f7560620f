"""Which events wake a person, and with which words."""

from __future__ import annotations

from typing import Any

import pytest

from rigd.front.alerts import alert_of

TRIP = {
    "n": 7,
    "run": "r1",
    "kind": "trip",
    "subject": "PRESSURE-HIGH",
    "utc": "2026-01-02T03:04:05+00:00",
    "text": "Pressure before the column rose above its limit.",
    "fields": {
        "first_out": True,
        "tag": "PT-1",
        "value": 8.25,
        "limit": 8.0,
        "unit": "bar",
        "stop": "cut",
        "did": "stopped both pumps",
        "do": "find the block",
    },
}


def test_trip_alert_tells_everything() -> None:
    alert = alert_of(TRIP, "bench-3", simulated=False)
    assert alert is not None
    assert alert.priority == 1
    assert alert.id == "r1-7"
    assert alert.title == "bench-3: TRIP PRESSURE-HIGH"
    for part in ("rose above its limit", "8.25 bar", "limit 8 bar", "stopped both pumps", "find the block", "03:04:05"):
        assert part in alert.text


def test_simulated_is_said_first() -> None:
    alert = alert_of(TRIP, "bench-3", simulated=True)
    assert alert is not None
    assert alert.title.startswith("SIMULATED ")


@pytest.mark.parametrize(
    ("kind", "subject", "fields", "priority"),
    [
        ("order", "PU-A", {}, None),
        ("phase", "prime", {}, None),
        ("fault", "scan", {}, 2),
        ("prompt", "refill", {"status": "open"}, 3),
        ("prompt", "refill", {"status": "confirmed"}, None),
        ("run state", "complete", {}, 3),
        ("run state", "running", {}, None),
        ("alarm", "A1", {"state": "unacknowledged", "announce": "new", "priority": 2}, 2),
        ("alarm", "A1", {"state": "unacknowledged", "announce": "again", "priority": 2}, 2),
        ("alarm", "A1", {"state": "acknowledged", "announce": "off", "priority": 2}, None),
        ("alarm", "A1", {"state": "shelved", "announce": "-", "priority": 2}, None),
    ],
)
def test_who_is_told(kind: str, subject: str, fields: dict[str, Any], priority: int | None) -> None:
    alert = alert_of({"n": 1, "kind": kind, "subject": subject, "text": "x", "fields": fields}, "r", False)
    assert (alert.priority if alert else None) == priority


def test_an_alert_carries_the_head_of_the_record() -> None:
    event = {"n": 1, "kind": "trip", "subject": "X", "text": "x", "fields": {}, "record": [41, "ab" * 32]}
    alert = alert_of(event, "r", False)
    assert alert is not None
    assert f"Record 41: {'ab' * 32}" in alert.text
