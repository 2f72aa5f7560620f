"""The end of a permit and overdue proof tests, in the core."""

from __future__ import annotations

from fakes.rehearsal import Rehearsal, StandIn
from fakes.rigs import S, program_of

from rigd.model.events import EventKind


def ready(**options) -> Rehearsal:
    rehearsal = Rehearsal(program_of(**options), StandIn())
    rehearsal.ready()
    return rehearsal


def test_the_rig_is_flushed_and_stopped_when_the_permit_ends() -> None:
    rehearsal = ready(unattended=True, permit_ns=60 * S)
    rehearsal.run(57.0)
    assert rehearsal.happened(EventKind.TRIP) == []
    rehearsal.run(3.0)
    (trip,) = rehearsal.happened(EventKind.TRIP)
    assert (trip.subject, trip.fields["stop"]) == ("PERMIT-END", "quench")
    assert "the permit for unattended work has ended" in trip.text


def test_without_an_end_nothing_happens() -> None:
    rehearsal = ready()
    rehearsal.run(100.0)
    assert rehearsal.happened(EventKind.TRIP) == []
    assert rehearsal.snapshot()["alarms"] == []


def test_overdue_proof_tests_are_an_alarm_of_an_attended_run() -> None:
    rehearsal = ready(overdue=("BED-HOT",))
    (alarm,) = rehearsal.happened(EventKind.ALARM)
    assert (alarm.subject, alarm.fields["priority"]) == ("PROOF-OVERDUE", 4)
    assert "no proof test in date: BED-HOT" in alarm.text
    rehearsal.run(30.0)
    assert len(rehearsal.happened(EventKind.ALARM)) == 1
