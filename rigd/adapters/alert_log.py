"""What became of each alert: one line of JSON per attempt in ``alerts.jsonl`` of the run folder.

That a receiver took an alert does not say that a person read it; that a person was reached is what ``rigd alert-test``
records.
"""

from __future__ import annotations

import json
import logging
from datetime import UTC, datetime
from pathlib import Path

log = logging.getLogger(__name__)
NAME = "alerts.jsonl"


class AlertLog:
    """Appends; a disk that cannot be written is logged and holds nothing up."""

    def __init__(self, folder: Path) -> None:
        self._path = folder / NAME

    def attempt(self, alert_id: str, channel: str, title: str, taken: bool) -> None:
        """One attempt to hand an alert to a channel."""
        line = {
            "utc": datetime.now(UTC).isoformat(timespec="milliseconds"),
            "alert": alert_id,
            "channel": channel,
            "title": title,
            "outcome": "taken" if taken else "not taken",
        }
        try:
            with self._path.open("a", encoding="utf-8") as file:
                file.write(json.dumps(line, ensure_ascii=False) + "\n")
        except OSError as error:
            log.warning("%s cannot be written: %s", self._path, error.strerror)


def attempts_of(folder: Path) -> tuple[dict[str, str], ...]:
    """Every attempt of a run, oldest first; none without a log. A line that is torn or foreign is left out."""
    try:
        lines = (folder / NAME).read_text(encoding="utf-8", errors="replace").splitlines()
    except OSError:
        return ()
    found = []
    for line in lines:
        try:
            told = json.loads(line)
        except ValueError:
            continue
        if isinstance(told, dict) and isinstance(told.get("outcome"), str):
            found.append({str(key): str(value) for key, value in told.items()})
    return tuple(found)
