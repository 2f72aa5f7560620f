"""Topics and payloads: what a snapshot or an event looks like on the broker. Pure.

All topics start with ``<prefix>/<rig name>/``:

- ``status``     "online" or "offline" (retained; "offline" is also the last will, "finished" a clean end)
- ``state``      run state, stop in force, phase, progress, head of the record (retained JSON with time and number)
- ``alarms``     the list of standing alarms and tripped interlocks (retained JSON)
- ``value/<tag>``  value, quality, unit (JSON, not retained)
- ``event``      each event (JSON)
- ``alert``      each alert (JSON, quality of service 1)

Nothing is subscribed to: no command enters by the broker.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from rigd.front.alerts import Alert


@dataclass(frozen=True, slots=True)
class Publication:
    """One message for the broker. ``keep``: must not be dropped while the broker is away."""

    topic: str
    payload: str
    qos: int = 0
    retain: bool = False
    keep: bool = False


class Topics:
    """The topic tree of one rig."""

    def __init__(self, prefix: str, rig: str) -> None:
        self.root = f"{prefix}/{rig}"
        self.status = f"{self.root}/status"

    def of_snapshot(self, snapshot: Mapping[str, Any]) -> Iterator[Publication]:
        """State and alarms (retained) and one message per value."""
        keys = ("run", "record", "t_s", "utc", "state", "stop", "phase", "campaign", "n")
        state = {key: snapshot[key] for key in keys if key in snapshot}
        yield Publication(f"{self.root}/state", _json(state), retain=True)
        tripped = {key: value for key, value in snapshot.get("interlocks", {}).items() if "trip" in str(value).lower()}
        standing = {"utc": snapshot.get("utc", ""), "alarms": snapshot.get("alarms", []), "interlocks": tripped}
        yield Publication(f"{self.root}/alarms", _json(standing), retain=True)
        for tag, value in snapshot.get("values", {}).items():
            yield Publication(f"{self.root}/value/{tag}", _json({"t_s": snapshot.get("t_s"), **value}))

    def of_event(self, event: Mapping[str, Any]) -> Publication:
        """An event as it came through the door."""
        return Publication(f"{self.root}/event", _json(event), qos=1, keep=True)

    def of_alert(self, alert: Alert) -> Publication:
        """An alert, with its id for de-duplication."""
        body = {
            "id": alert.id,
            "priority": alert.priority,
            "title": alert.title,
            "text": alert.text,
            "event": alert.event,
        }
        return Publication(f"{self.root}/alert", _json(body), qos=1, keep=True)


def _json(value: object) -> str:
    return json.dumps(value, ensure_ascii=False, separators=(",", ":"), sort_keys=True)
