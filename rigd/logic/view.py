"""What conduct may see of the rig in one scan: judged samples, verdict, answers to its orders."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.model.devices import DeviceStatus, LinkState
from rigd.model.orders import Outcome, Request, Stop
from rigd.model.samples import Quality, Sample


@dataclass(frozen=True, slots=True)
class Verdict:
    """What protect says this scan.

    ``permit`` is False while any interlock is tripped or not yet reset after the start. ``quench_active`` tells that
    the flush of a quench is under way; ``stop_done`` that the stop in force has reached its end state (confirmed).
    ``first_out`` is the interlock that tripped first, "" without one. ``hold_wanted`` names an alarm or interlock that
    asks for a hold, "" if none. ``hidden_alarm`` names an alarm on an interlocked signal that a person hides.
    """

    stop: Stop = Stop.NONE
    permit: bool = False
    quench_active: bool = False
    stop_done: bool = False
    first_out: str = ""
    hold_wanted: str = ""
    hidden_alarm: str = ""


@dataclass(frozen=True, slots=True)
class View:
    """The process image at ``now_ns`` after judging, and what is new since the last scan."""

    now_ns: int
    samples: Mapping[str, Sample]
    verdict: Verdict
    outcomes: tuple[Outcome, ...] = ()
    requests: tuple[Request, ...] = ()
    devices: Mapping[str, DeviceStatus] = field(default_factory=dict)
    fresh: frozenset[str] = frozenset()  # tags with a new sample in this scan

    def value(self, tag: str) -> float | None:
        """The value of a tag, or ``None`` when it was never seen or is bad."""
        sample = self.samples.get(tag)
        if sample is None or sample.quality is Quality.BAD:
            return None
        return sample.value

    def online(self, device: str) -> bool:
        """True when the device answers."""
        status = self.devices.get(device)
        return status is not None and status.link in (LinkState.ONLINE, LinkState.DEGRADED)
