"""What the early rules learned and said is decided again exactly from the record."""

from __future__ import annotations

from fakes.recorded import recorded

from rigd.adapters.journal_reader import JournalReader
from rigd.model.events import EventKind
from rigd.ports.plant import FaultSpec
from rigd.runtime.replay import replay

PARTLY = FaultSpec("block", "COL", onset_s=75.0, magnitude=0.97)


def test_an_early_alarm_is_decided_again() -> None:
    run = recorded(PARTLY, limit_s=160)
    with JournalReader(run) as journal:
        alarms = [event.subject for event in journal.events(EventKind.ALARM)]
        learned = [event.subject for event in journal.events(EventKind.MEASUREMENT)]
    assert "CLOG-PT-1" in alarms
    assert learned[:2] == ["resistance PT-1", "resistance PT-2"]
    assert replay(run).same
