"""A run for programs: the keys that ``--json`` promises."""

from __future__ import annotations

from dataclasses import asdict

from rigd.model.events import Event, EventKind
from rigd.report.alarm_load import alarm_load
from rigd.report.alarm_records import record_facts
from rigd.report.calibrations import calibration_rows
from rigd.report.data import CHAIN_HEAD, PointRow, RunData
from rigd.report.kinetic_fit import kinetics_of
from rigd.report.response_rows import age_rows, trip_rows
from rigd.report.words import earlier_points, first_out


def report_facts(run: RunData) -> dict[str, object]:
    """Outcome, points, fits, peaks, what was used, trips and alarms."""
    return {
        "run": run.id,
        "folder": run.folder,
        "outcome": run.outcome,
        "text": run.outcome_text,
        "simulated": run.simulated,
        "pace": run.pace,
        "duration_s": run.duration_s,
        "collected_earlier": earlier_points(run),
        "points": [point_facts(point) for point in run.points],
        "kinetics": [
            {
                "temperature_degC": fit.temperature_degC,
                "law": fit.fit.law.value,
                "k": fit.fit.k,
                "k_standard_error": fit.fit.k_error,
                "unit": fit.fit.unit,
                "points": list(fit.used),
            }
            for fit in kinetics_of(run).fits
        ],
        "peak": {tag: trace.peak for tag, trace in run.traces.items()},
        "used_mL": dict(run.used_mL),
        "trips": trip_facts(run.events),
        "alarms": alarm_facts(run.events),
        "alarm_load": asdict(alarm_load(run.events, run.duration_s)),
        "alarm_records": record_facts(run),
        "response": {
            "sample_age": [asdict(row) for row in age_rows(run)],
            "trips": [asdict(row) for row in trip_rows(run)],
        },
        "calibrations": [asdict(row) for row in calibration_rows(run.facts)],
        "chain_head": run.facts.get(CHAIN_HEAD, ""),
    }


def point_facts(point: PointRow) -> dict[str, object]:
    """One point."""
    return {
        "id": point.id,
        "kind": point.kind,
        "flow_mL_min": dict(point.flows_mL_min),
        "temperature_degC": point.temperature_degC,
        "residence_time_s": point.residence_time_s,
        "status": point.status,
        "settled": point.settled,
        "settle_s": point.settle_s,
        "conversion": point.conversion,
        "conversion_sd": point.conversion_sd,
        "selectivity": point.selectivity,
        "collected_mL": point.collected_mL,
        "collect_start_s": point.collect_start_s,
        "collect_end_s": point.collect_end_s,
    }


def trip_facts(events: tuple[Event, ...] | list[Event]) -> list[dict[str, object]]:
    """Trips in order; exactly one is the first-out."""
    trips = [event for event in events if event.kind is EventKind.TRIP]
    first = first_out(trips)
    return [
        {"id": event.subject, "cause": event.text, "t_s": event.t_ns / 1e9, "first_out": event is first}
        for event in trips
    ]


def alarm_facts(events: tuple[Event, ...] | list[Event]) -> list[dict[str, object]]:
    """Changes of alarm states in order."""
    alarms = [event for event in events if event.kind is EventKind.ALARM]
    return [
        {"id": event.subject, "state": event.fields.get("state"), "text": event.text, "t_s": event.t_ns / 1e9}
        for event in alarms
    ]
