"""Which calibrations of a rig are in force, which are overdue, and what a run must know of them. Pure: records and
time come in. They stand in the rig's record as JSON in ``detail``: the values, and ``due_utc``.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from datetime import UTC, datetime

from rigd.model.calibration import Calibrated, Corrections
from rigd.model.errors import JournalError
from rigd.model.problems import Problem, Severity
from rigd.model.records import RecordKind, RigRecord
from rigd.model.rig import RigDefinition, TagKind

KINDS = (RecordKind.PUMP, RecordKind.SENSOR, RecordKind.SEGMENT)
VOLUME_OFF = 0.1
"""A measured hold-up that departs more than this from the drawn one is told (proposal; no source)."""


def record_of(one: Calibrated, as_found: str, as_left: str) -> RigRecord:
    """The entry for the rig's record."""
    detail = json.dumps({"due_utc": one.due_utc, "values": dict(one.values)})
    return RigRecord(one.kind, one.subject, one.utc, one.who, True, as_found, as_left, detail)


def in_force(rig: RigDefinition, records: Iterable[RigRecord]) -> tuple[Calibrated, ...]:
    """The last calibration of each part that the rig still has. ``JournalError`` for an entry that says no numbers."""
    last = {(one.kind, one.subject): one for one in records if one.kind in KINDS}
    known = {
        RecordKind.PUMP: {pump.id for pump in rig.pumps},
        RecordKind.SENSOR: {tag.id for tag in rig.tags if tag.kind is TagKind.MEASURED},
    }
    return tuple(
        _read(record) for (kind, subject), record in last.items() if kind not in known or subject in known[kind]
    )


def _read(record: RigRecord) -> Calibrated:
    try:
        told = json.loads(record.detail)
        values = {str(name): float(value) for name, value in told["values"].items()}
        due = str(told["due_utc"])
        datetime.fromisoformat(due)
        needed = {RecordKind.PUMP: ("factor",), RecordKind.SENSOR: ("zero", "gain")}.get(record.kind, ("volume_mL",))
        if not all(math.isfinite(values[name]) for name in needed) or values.get("factor", 1.0) <= 0:
            raise ValueError("a value that cannot be")
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        raise JournalError(f"the record of {record.kind.value} {record.subject} cannot be read: {error}") from error
    return Calibrated(record.kind, record.subject, record.utc, due, record.who, values)


def corrections(found: Iterable[Calibrated]) -> Corrections:
    """What the run applies; an overdue calibration is better than none and stays in force."""
    return Corrections(
        {one.subject: one.values["factor"] for one in found if one.kind is RecordKind.PUMP},
        {one.subject: (one.values["zero"], one.values["gain"]) for one in found if one.kind is RecordKind.SENSOR},
    )


def overdue(found: Iterable[Calibrated], now: datetime) -> tuple[Calibrated, ...]:
    """Those whose time is over."""
    return tuple(one for one in found if _time(one.due_utc) <= now)


def facts(found: Sequence[Calibrated], now: datetime) -> list[dict[str, object]]:
    """For the plan of a run, its journal and ``--json``."""
    late = overdue(found, now)
    return [{**asdict(one), "kind": one.kind.value, "overdue": one in late} for one in found]


def from_facts(told: Iterable[Mapping[str, object]]) -> tuple[Calibrated, ...]:
    """Back from ``facts``. ``JournalError`` when they are not."""
    try:
        return tuple(
            Calibrated(**{  # type: ignore[arg-type]
                **{name: value for name, value in one.items() if name != "overdue"},
                "kind": RecordKind(str(one["kind"])),
            })
            for one in told
        )  # fmt: skip
    except (TypeError, ValueError, KeyError, AttributeError) as error:
        raise JournalError(f"the calibrations of the run cannot be read: {error}") from error


def problems(
    found: Sequence[Calibrated], now: datetime, flows_mL_min: Mapping[str, float], rates_max_mL_min: Mapping[str, float]
) -> list[Problem]:
    """Overdue ones, and planned flows (largest per pump) that a pump which gives less cannot reach."""
    told = [
        Problem(
            "calibration-overdue",
            f"the {one.kind.value} of {one.subject} was due on {one.due_utc[:10]} (done {one.utc[:10]} by {one.who})",
            "do it again: rigd calibrate --help",
            severity=Severity.WARNING,
        )
        for one in overdue(found, now)
    ]
    for pump, factor in corrections(found).pumps.items():
        flow, most = flows_mL_min.get(pump, 0.0), rates_max_mL_min.get(pump, math.inf) * factor
        if flow > most * (1 + 1e-9):
            message = f"{pump} delivers at most {most:.4g} mL/min by its calibration, {flow:.4g} mL/min are planned"
            told.append(Problem("calibrated-rate", message, "plan less flow through it"))
    return [*told, *(_volume_off(one) for one in found if one.kind is RecordKind.SEGMENT and _is_off(one))]


def _is_off(one: Calibrated) -> bool:
    drawn_mL = one.values.get("drawn_mL", 0.0)
    return drawn_mL > 0 and abs(one.values["volume_mL"] / drawn_mL - 1.0) > VOLUME_OFF


def _volume_off(one: Calibrated) -> Problem:
    volume_mL, drawn_mL = one.values["volume_mL"], one.values["drawn_mL"]
    return Problem(
        "volume-off",
        f"{one.subject} holds {volume_mL:.4g} mL by tracer ({one.utc[:10]}), the rig file said {drawn_mL:.4g} mL then",
        "correct bores, lengths or voidage in the rig file, then measure again: delays and hold-ups follow from them",
        severity=Severity.WARNING,
    )


def _time(utc: str) -> datetime:
    found = datetime.fromisoformat(utc)
    return found if found.tzinfo else found.replace(tzinfo=UTC)
