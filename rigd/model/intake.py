"""Everything that reaches the core in one scan, in order of arrival. A journal of these is a replay."""

from __future__ import annotations

from dataclasses import dataclass

from rigd.model.devices import DeviceStatus
from rigd.model.orders import Outcome, Request
from rigd.model.samples import Sample


@dataclass(frozen=True, slots=True)
class Intake:
    """New since the last scan: samples, outcomes of orders, link changes, requests, and faults of the shell.

    ``faults`` are (subject, detail) pairs that the shell reports about itself: scan late, journal not writable,
    host suspended.
    """

    samples: tuple[Sample, ...] = ()
    outcomes: tuple[Outcome, ...] = ()
    links: tuple[DeviceStatus, ...] = ()
    requests: tuple[Request, ...] = ()
    faults: tuple[tuple[str, str], ...] = ()


NOTHING = Intake()
