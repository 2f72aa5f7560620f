"""The daemon's one door for requests, as clients see it.

A Unix socket, one JSON object per line, UTF-8. A client sends ``{"do": "request", "id", "verb", "who", "target",
"args"}``, ``{"do": "subscribe"}`` or ``{"do": "snapshot"}``; the front also ``{"do": "alerts", "down"}``, with "" or
why nobody can be alerted now. The daemon answers ``{"say": "answer", "id", "ok", "detail"}``, ``{"say": "snapshot",
...}`` (``SNAPSHOT_KEYS``) at most 5 times a wall second, ``{"say": "event", ...}`` for each event (with a rising
``n``), ``{"say": "end", "outcome", "exit"}`` last. A slow client loses snapshots, never events up to
``EVENT_BACKLOG``; then it is dropped.
"""

from __future__ import annotations

from collections.abc import AsyncIterator, Mapping
from typing import Protocol

EVENT_BACKLOG = 2000
WAKING = 2
"""An alert channel that takes this priority wakes a person."""

SNAPSHOT_KEYS = (
    "run",  # id, folder, rig, recipe, simulated, pace, pid
    "record",  # number and hash of the last record of the journal's chain that is on the disk
    "t_s",  # process seconds since the start of the run
    "utc",
    "state",  # run state
    "stop",  # stop in force: none, hold, quench, cut
    "phase",  # id, label, point, step, progress 0..1 or null, left_s or null
    "campaign",  # points done, points total, left_s or null
    "values",  # tag -> {"v": number|null, "q": "good"|"uncertain"|"bad", "c": cause, "u": unit, "text": label|""}
    "interlocks",  # id -> state
    "alarms",  # list of {"id", "state", "hidden", "priority", "title", "text", "do", "since_s"} that stand
    "prompts",  # list of {"id", "text"} waiting for a person
    "devices",  # id -> {"link", "detail"}
    "used_mL",  # liquid -> mL drawn
)


class DoorClient(Protocol):
    """A connection to a running daemon. Raises ``DoorError`` with a sentence when it cannot be reached."""

    async def request(
        self, verb: str, who: str, target: str = "", args: Mapping[str, str | float] | None = None
    ) -> str:
        """Ask, wait for the answer, return its detail; ``DoorError`` when refused."""

    def messages(self) -> AsyncIterator[Mapping[str, object]]:
        """Subscribe: snapshots and events until the daemon ends."""
