"""Devices as the daemon knows them: where they are, how they answer, what stops them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntEnum, StrEnum


class PumpState(IntEnum):
    """Channel ``state`` of every pump."""

    STOPPED = 0
    DELIVERING = 1
    REFILLING = 2
    STALLED = 3
    EMPTY = 4


VALVE_MOVING = -1
VALVE_LOST = -2
"""Channel ``position`` of a valve is the index into its declared positions, or one of these two."""

PUMP_CHANNELS = ("flow", "level", "standby", "delivered", "state")
"""mL/min now; mL deliverable from the active syringe; mL ready in the other one (0 for a single); mL delivered
since power-on, counted by the pump, never falling; ``PumpState``."""
VALVE_CHANNELS = ("position",)
CHILLER_CHANNELS = ("bath", "setpoint", "circulating")
"""degC measured in the bath; degC in force as the chiller reads it back; 1 when the circulation pump runs."""


class LinkState(StrEnum):
    """State of the way to a device."""

    CLOSED = "closed"
    OPENING = "opening"
    ONLINE = "online"
    DEGRADED = "degraded"
    FAILED = "failed"


@dataclass(frozen=True, slots=True)
class DeviceIdentity:
    """Who answered at the other end. ``simulated`` must be told by the device itself."""

    maker: str
    model: str
    serial_no: str
    firmware: str = ""
    simulated: bool = False


@dataclass(frozen=True, slots=True)
class DeviceStatus:
    """How the link to a device is; one value per change."""

    device: str
    link: LinkState
    t_ns: int
    detail: str = ""
    identity: DeviceIdentity | None = None
    power_cycled: bool = False


@dataclass(frozen=True, slots=True)
class LinkSpec:
    """A port: an operating-system path, a URL that the serial library opens, or the word ``simulated``."""

    id: str
    port: str
    baud: int = 115200
    data_bits: int = 8
    parity: str = "none"
    stop_bits: float = 1.0
    reply_timeout_s: float = 0.3
    retries: int = 2


@dataclass(frozen=True, slots=True)
class ChannelSpec:
    """A device channel that is read as a tag, and how often."""

    channel: str
    tag: str
    period_ns: int


@dataclass(frozen=True, slots=True)
class DeviceSpec:
    """One device on one link. ``unit`` is the rig part that it drives or "" for a pure instrument.

    ``options`` are the keys of the device's own table in the rig file, checked by its driver; ``facts`` are plain
    numbers and lists about the unit that the driver needs, made by the rig compiler: always ``retries`` (of the link);
    for a pump ``syringes``, ``bore_mm``, ``stroke_mL``; for a valve ``positions`` (names in order) and ``rest``
    (name); for a sensor module ``spans`` (channel -> (low, high)). A driver skips a check whose fact is missing.
    ``last_resort``: its last will takes the drive power away; sent when others do not confirm that they stopped.
    """

    id: str
    driver: str
    dialect: str
    link: str
    address: str
    unit: str
    channels: tuple[ChannelSpec, ...]
    serial_no: str = ""
    options: Mapping[str, object] = field(default_factory=dict)
    facts: Mapping[str, object] = field(default_factory=dict)
    last_resort: bool = False


@dataclass(frozen=True, slots=True)
class WillFrame:
    """One message of a last will: the exact bytes, and the pattern (bytes regular expression) of a good answer."""

    request: bytes
    good_reply: bytes
    reply_timeout_s: float = 0.3


@dataclass(frozen=True, slots=True)
class LastWill:
    """What stops a device when nobody is left to think: compiled by its driver when the rig file is loaded.

    ``check`` asks whether it stopped; its ``good_reply`` matches only an answer that says so. Empty ``frames`` mean
    a device that moves nothing.
    """

    device: str
    link: LinkSpec
    frames: tuple[WillFrame, ...]
    check: tuple[WillFrame, ...] = ()
