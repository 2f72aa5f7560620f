"""Devices of a rehearsal that fall silent or lose their power are told as the live shell tells them."""

from __future__ import annotations

import pytest
from fakes.recorded import RECIPE, RIG, S, recorded

from rigd.adapters.journal_reader import JournalReader
from rigd.app import DrySettings, dry_run
from rigd.model.devices import LinkState
from rigd.model.events import EventKind
from rigd.model.samples import Reading
from rigd.ports.plant import NO_ANSWER, FaultSpec
from rigd.runtime.dry import DryOptions
from rigd.runtime.dry_links import DryLinks
from rigd.runtime.replay import replay

SILENT = (Reading("x", float("nan"), fault=NO_ANSWER),)
HEARD = (Reading("x", 1.0),)


def test_the_first_missed_poll_degrades_the_second_fails_and_an_answer_brings_back():
    links = DryLinks(["a", "b"], tuple)
    assert [(one.device, one.link) for one in links.news(0)] == [("a", LinkState.ONLINE), ("b", LinkState.ONLINE)]
    told = []
    for t_ns, readings in enumerate((HEARD, SILENT, HEARD, SILENT, SILENT, SILENT, HEARD)):
        assert links.heard("a", readings, t_ns) == (() if readings is SILENT else HEARD)
        told += [(one.t_ns, one.link) for one in links.news(t_ns)]
    assert told == [
        (1, LinkState.DEGRADED), (2, LinkState.ONLINE), (3, LinkState.DEGRADED), (4, LinkState.FAILED),
        (6, LinkState.ONLINE),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("kind", "target", "trips"),
    [("silent", "sensors", "LINK-sensors"), ("silent", "pump-a", "LINK-pump-a"), ("restart", "PU-A", "POWER-pump-a")],
)
def test_a_silent_and_a_restarted_device_trip_their_interlock_and_replay(kind, target, trips):
    run = recorded(FaultSpec(kind, target, onset_s=10.0), limit_s=14)
    with JournalReader(run) as journal:
        trip = journal.events(EventKind.TRIP)[0]
    assert trip.subject == trips
    assert 10.0 <= trip.t_ns / 1e9 <= 12.0
    assert replay(run).same


def test_an_order_to_a_silent_pump_fails_and_is_not_called_refused():
    fault = FaultSpec("silent", "pump-a", onset_s=10.0)
    result = dry_run(RIG, RECIPE, DrySettings(faults=(fault,), options=DryOptions(limit_ns=14 * S))).result
    failed = [event for event in result.events if event.fields.get("detail") == NO_ANSWER or NO_ANSWER in event.text]
    assert failed
    assert not any(event.fields.get("result") == "refused" for event in failed)
