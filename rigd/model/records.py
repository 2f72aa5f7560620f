"""What is on record about a rig itself, between runs: proof tests of its interlocks, tests of its alert path,
calibrations."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class RecordKind(StrEnum):
    """What was done; ``subject`` of the record in brackets."""

    PROOF = "proof test"  # interlock: from stimulus to final element
    ALERT_SENT = "alert sent"  # channel; detail holds the code word that was sent
    ALERT_RECEIVED = "alert received"  # channel: a person told the code word back
    PUMP = "pump calibration"  # pump; detail holds the values as JSON (rigd.config.calibrating)
    SENSOR = "sensor calibration"  # tag
    SEGMENT = "segment by tracer"  # parts joined by "+"


@dataclass(frozen=True, slots=True)
class RigRecord:
    """One dated entry. ``utc`` is ISO 8601 with offset; ``passed`` is False for a proof test that found a fault.

    ``as_found`` and ``as_left`` say in what state the interlock was met and left.
    """

    kind: RecordKind
    subject: str
    utc: str
    who: str
    passed: bool = True
    as_found: str = ""
    as_left: str = ""
    detail: str = ""
