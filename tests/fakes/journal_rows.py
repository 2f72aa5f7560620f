"""A journal with something of everything in it."""

from __future__ import annotations

import math
from pathlib import Path

from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Action, Authority, Order, Outcome, Request, Result, Verb
from rigd.model.rig import Tag, TagKind
from rigd.model.samples import Quality, QualityCause, Sample, Spectrum

S = 1_000_000_000
TAGS = (
    Tag("PT-1", "pressure", TagKind.MEASURED, "pressure", "bar", 0.0, 25.0, "sensors", "p1", S, S),
    Tag("V-A.position", "valve", TagKind.FEEDBACK, "position", "", -2, 2, "v", "position", S, S, labels=("a", "b")),
)
UTC = "2026-03-04T05:06:07.000+00:00"


def rich_intake(number: int) -> Intake:
    """Something of every kind, with values that a careless encoding would change."""
    who = DeviceIdentity("bench", "SP2", "77", "1.0", simulated=True)
    return Intake(
        samples=(
            Sample("PT-1", 0.1 + 0.2, number * S, raw=10244),
            Sample("PT-1", math.inf, number * S, Quality.UNCERTAIN, QualityCause.OUT_OF_SPAN),
            Sample("V-A.position", 1.0, number * S + 1),
        ),
        outcomes=(Outcome(4, "PU-A", Action.DELIVER, Result.REFUSED, number * S, "no value"),),
        links=(DeviceStatus("pump-a", LinkState.ONLINE, number * S, "µ°", who, power_cycled=True),),
        requests=(Request("c1-1", Verb.BYPASS, "ann", number * S, "PT", {"reason": "proof test", "duration_s": 60.5}),),
        faults=(("scan", "late"),),
    )


def decisions(number: int) -> tuple[list[Order], list[Event]]:
    """An order and an event."""
    order = Order(number, "PU-A", Action.STOP, 0.1 * number, Authority.CUT, "PRESSURE-HIGH", number * S)
    event = Event(EventKind.TRIP, "PRESSURE-HIGH", number * S, "Too high.", {"value": 8.25, "first_out": True, "n": 3})
    return [order], [event]


def filled(path: Path, count: int = 20) -> None:
    """A closed journal of ``count`` scans."""
    journal = SqliteJournal(path, {"simulated": "yes"}, TAGS)
    for number in range(1, count + 1):
        journal.scan(number, number * S, UTC, rich_intake(number))
        journal.decided(number, *decisions(number))
    journal.spectrum(Spectrum("ir", 5, 860.0, 4.0, (0.5, -0.25, 1.0)))
    journal.bytes_seen("bus-1", 7, True, b"\x00\xff")
    journal.close("done")
