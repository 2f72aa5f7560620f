"""Each attempt to tell a person leaves a line, with the head of the record in what was sent."""

from __future__ import annotations

import asyncio
import json
from collections.abc import AsyncIterator
from pathlib import Path
from typing import Any

from rigd.adapters.alert_log import NAME, AlertLog
from rigd.front import service
from rigd.front.service import Front
from rigd.model.rig import AlertChannel, Outside

SNAPSHOT = {"say": "snapshot", "run": {"id": "r1", "simulated": True}, "record": [7, "ab" * 32]}
TRIP = {"say": "event", "n": 1, "kind": "trip", "subject": "BED-HOT", "text": "too hot", "fields": {}}


class Phone:
    """Takes an alert at the second attempt."""

    channel = AlertChannel("phone", "json://nowhere")

    def __init__(self) -> None:
        self.sent: list[str] = []

    async def send(self, title: str, text: str, urgent: bool) -> bool:
        self.sent.append(text)
        return len(self.sent) > 1


async def messages() -> AsyncIterator[dict[str, Any]]:
    for message in (SNAPSHOT, TRIP, {"say": "end", "outcome": "tripped", "exit": 1}):
        yield message


async def test_attempts_are_written(tmp_path: Path, monkeypatch: Any) -> None:
    monkeypatch.setattr(service, "RETRY_PAUSES_S", (0.01,))
    phone = Phone()
    await asyncio.wait_for(Front("rig", Outside(None, ()), [phone], AlertLog(tmp_path).attempt).run(messages()), 10)
    lines = [json.loads(line) for line in (tmp_path / NAME).read_text(encoding="utf-8").splitlines()]
    assert [(line["alert"], line["channel"], line["outcome"]) for line in lines] == [
        ("r1-1", "phone", "not taken"),
        ("r1-1", "phone", "taken"),
    ]
    assert all(f"Record 7: {'ab' * 32}" in text for text in phone.sent)


def test_a_disk_that_cannot_be_written_holds_nothing_up(tmp_path: Path) -> None:
    AlertLog(tmp_path / "none").attempt("a", "phone", "x", True)
    assert not (tmp_path / "none").exists()
