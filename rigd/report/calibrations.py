"""The calibrations that a run was made with, from the facts in its journal."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigd.config.calibrating import from_facts
from rigd.model.calibration import Calibrated
from rigd.model.errors import JournalError
from rigd.model.records import RecordKind

FACT = "calibrations"


@dataclass(frozen=True, slots=True)
class CalibrationRow:
    """One of them in words; ``overdue`` when the run began."""

    part: str
    done: str
    who: str
    due: str
    used: str
    overdue: bool


def calibration_rows(facts: Mapping[str, str]) -> tuple[CalibrationRow, ...]:
    """All in force when the run began; none for a run of before there were any, or a fact that is none."""
    try:
        told = json.loads(facts.get(FACT, "") or "[]")
        return tuple(
            CalibrationRow(one.subject, one.utc[:10], one.who, one.due_utc[:10], used_words(one), bool(fact["overdue"]))
            for one, fact in zip(from_facts(told), told, strict=True)
        )
    except (ValueError, TypeError, KeyError, JournalError):
        return ()


def used_words(one: Calibrated) -> str:
    """What a run makes of it."""
    values = one.values
    if one.kind is RecordKind.PUMP:
        spread = f" ± {values['factor_expanded']:.4f} (95 %)" if "factor_expanded" in values else ""
        return f"delivers {values['factor']:.4f}{spread} of what it is told; orders and counts are corrected"
    if one.kind is RecordKind.SENSOR:
        return f"(reading - {values['zero']:.4g}) x {values['gain']:.4f}"
    return f"{values['volume_mL']:.4g} mL by tracer, Peclet {values.get('peclet', math.inf):.3g}; not used by the run"
