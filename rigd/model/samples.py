"""What an instrument says, and how far it may be believed."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum, StrEnum


class Quality(IntEnum):
    """How far a value may be believed; the worse compares greater."""

    GOOD = 0
    UNCERTAIN = 1
    BAD = 2


class QualityCause(StrEnum):
    """Why a value is not good (or is good but marked)."""

    NONE = "none"
    NEVER_SEEN = "never seen"
    STALE = "stale"
    OUT_OF_SPAN = "out of span"
    SENSOR_FAULT = "sensor fault"
    LINK_LOST = "link lost"
    FROZEN = "frozen"
    NOT_A_NUMBER = "not a number"
    DISCREPANT = "discrepant"
    SUBSTITUTED = "substituted"


@dataclass(frozen=True, slots=True)
class Reading:
    """One channel of one device as the driver read it; not yet judged.

    ``value`` is in the channel's declared unit; ``raw`` the device's own integer code where it has one (the frozen
    rule needs it); ``fault`` the device's own words when it says that the value is wrong, else empty.
    """

    channel: str
    value: float
    raw: int | None = None
    fault: str = ""


@dataclass(frozen=True, slots=True)
class Sample:
    """A reading under its tag, with the time of acquisition (monotonic ns) and a judged quality."""

    tag: str
    value: float
    t_ns: int
    quality: Quality = Quality.GOOD
    cause: QualityCause = QualityCause.NONE
    raw: int | None = None


@dataclass(frozen=True, slots=True)
class Spectrum:
    """An absorbance spectrum on an even wavenumber grid: ``start_per_cm + i * step_per_cm``."""

    source: str
    t_ns: int
    start_per_cm: float
    step_per_cm: float
    absorbance: tuple[float, ...]
