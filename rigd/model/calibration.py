"""Calibrations of a rig that are in force, as plain values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.model.records import RecordKind


@dataclass(frozen=True, slots=True)
class Calibrated:
    """One calibration: of what, when, until when, by whom; ``values`` by name with units last.

    A pump has ``factor`` (delivered over ordered, with ``factor_expanded`` and ``coverage``); a sensor ``zero`` in the
    unit of its tag and ``gain`` (true = (shown - zero) * gain); a segment ``volume_mL``, ``tanks`` and, below one
    tank's spread, ``peclet``.
    """

    kind: RecordKind
    subject: str
    utc: str
    due_utc: str
    who: str
    values: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Corrections:
    """What a run applies: factors of pumps by id, (zero, gain) of sensors by tag."""

    pumps: Mapping[str, float] = field(default_factory=dict)
    sensors: Mapping[str, tuple[float, float]] = field(default_factory=dict)

    def __bool__(self) -> bool:
        return bool(self.pumps or self.sensors)
