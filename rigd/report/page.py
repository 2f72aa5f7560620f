"""The report as one HTML file that needs nothing else: no script, no link out, figures inside."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from rigd import __version__
from rigd.adapters.whole_file import write_whole
from rigd.analysis.kinetics import law_of
from rigd.model.events import Event, EventKind
from rigd.model.protection import ConditionKind
from rigd.model.rig import TagKind
from rigd.report.alarm_load import alarm_load
from rigd.report.alarm_records import alarm_records, record_facts
from rigd.report.calibrations import calibration_rows
from rigd.report.cause_effect import LEGEND, matrix
from rigd.report.data import PointRow, RunData, Trace
from rigd.report.ending import RUNNING, UNFINISHED
from rigd.report.figures import conversion_figure, timeline_figure, with_error
from rigd.report.gaps import gaps
from rigd.report.kinetic_fit import Kinetics, kinetics_of
from rigd.report.response_rows import age_rows, trip_rows
from rigd.report.words import (
    CAUTIONS,
    clock,
    duration,
    followers_words,
    number,
    of_kind,
    outcome_words,
    percent,
    points_words,
    trip_groups,
    utc,
)

FILE_NAME = "report.html"

_TOLD = (
    EventKind.TRIP, EventKind.ALARM, EventKind.STOP, EventKind.REQUEST, EventKind.DEVICE, EventKind.FAULT,
    EventKind.MEASUREMENT, EventKind.NOTE, EventKind.RUN_STATE,
)  # fmt: skip


def write_page(run: RunData, target: Path | None = None, foreseen: Sequence[str] | None = None) -> Path:
    """Write the page beside the journal (or to ``target``) and return its path. ``foreseen``: for a rehearsal, what
    would go wrong."""
    return write_whole(target or Path(run.folder) / FILE_NAME, render_page(run, foreseen))


def render_page(run: RunData, foreseen: Sequence[str] | None = None) -> str:
    """The page as text."""
    environment = Environment(
        loader=PackageLoader("rigd.report"), autoescape=True, undefined=StrictUndefined, trim_blocks=True
    )
    environment.filters["clock"] = clock
    return environment.get_template("report.html.j2").render(_context(run), foreseen=foreseen)


def _context(run: RunData) -> dict[str, Any]:
    kinetics = kinetics_of(run)
    return {
        "run": _head(run),
        "outcome": outcome_words(run),
        "points_words": points_words(run),
        "chemistry": run.rig.chemistry.name if run.rig else "",
        "trips": [_trip(first, after) for first, after in trip_groups(of_kind(run, EventKind.TRIP))],
        "conversion_svg": Markup(conversion_figure(run, kinetics)) if _any_conversion(run) else "",
        "timeline_svg": Markup(timeline_figure(run)),
        "residence_note": _residence_note(run),
        "fits": [_fit(run, fit) for fit in kinetics.fits],
        "corrected": sorted({fit.activation_kJ_mol for fit in kinetics.fits if fit.activation_kJ_mol}),
        "remarks": kinetics.remarks,
        "points": [_point(point) for point in run.points],
        "peaks": [
            _peak(run, trace)
            for what in ("pressure", "temperature")
            for trace in run.measured(what)
            if _sensor(run, trace)
        ],
        "used": _used(run),
        "happened": [_event(event) for event in of_kind(run, *_TOLD)],
        "all_events": [_event(event) for event in run.events],
        "alarm_load": alarm_load(run.events, run.duration_s),
        "alarm_records": alarm_records(run),
        "attempts": record_facts(run)["attempts"],
        "ages": age_rows(run),
        "timed": trip_rows(run),
        "matrix": matrix(run.rig) if run.rig else None,
        "legend": LEGEND,
        "gaps": gaps(run.rig) if run.rig else (),
        "calibrations": calibration_rows(run.facts),
        "signed": _signed(run),
        "sheet": _sheet(run),
        "permit": _permit(run),
        "provenance": _provenance(run),
        "cautions": CAUTIONS,
    }


def _any_conversion(run: RunData) -> bool:
    return any(math.isfinite(point.conversion) for point in run.points)


def _head(run: RunData) -> dict[str, Any]:
    return {
        "id": run.id,
        "title": run.title or "Unnamed rig",
        "recipe_title": run.recipe_title,
        "simulated": run.simulated,
        "pace": run.pace,
        "outcome": run.outcome,
        "outcome_text": run.outcome_text,
        "outcome_known": run.outcome != UNFINISHED,
        "goes_on": run.outcome == RUNNING,
        "started": utc(run.started_utc),
        "ended": utc(run.ended_utc),
        "duration": duration(run.duration_s),
    }


def _trip(first: Event, after: list[Event]) -> dict[str, Any]:
    told = {key: str(first.fields.get(key, "")) for key in ("did", "do")}
    followers = {"after": [_event(event) for event in after], "after_words": followers_words(first, after)}
    return {"subject": first.subject, "t": clock(first.t_ns / 1e9), "text": first.text, **told, **followers}


def _event(event: Event) -> dict[str, str]:
    when = clock(event.t_ns / 1e9)
    return {"t": when, "kind": event.kind.value, "subject": event.subject, "text": event.text}


def _fit(run: RunData, fit: Kinetics) -> dict[str, Any]:
    reactant, partner = (run.rig.chemistry.reactant, law_of(run.rig.chemistry)[1]) if run.rig else ("", "")
    feed = f"{reactant} {fit.feed.reactant:.3g} mol/L".lstrip()
    if fit.feed.partner:
        feed += f" + {partner} {fit.feed.partner:.3g} mol/L"
    law = fit.fit.law.value + (f", K = {fit.fit.equilibrium_constant:g}" if fit.fit.equilibrium_constant else "")
    return {
        "temperature": f"{fit.temperature_degC:g}",
        "law": law,
        "k": with_error(fit.fit.k, fit.fit.k_error),
        "unit": fit.fit.unit,
        "feed": feed,
        "residual": f"{100 * fit.fit.residual_sd:.2f} %",
        "points": fit.fit.points,
    }


def _point(point: PointRow) -> dict[str, Any]:
    window = (
        f"{clock(point.collect_start_s)} – {clock(point.collect_end_s)}" if math.isfinite(point.collect_end_s) else ""
    )
    return {
        "id": point.id,
        "kind": point.kind,
        "flows": [f"{pump} {flow:.3g}" for pump, flow in point.flows_mL_min.items()],
        "total": f"{point.total_mL_min:.3g}",
        "temperature": f"{point.temperature_degC:g}",
        "bed": number(point.bed_degC, 1),
        "residence": duration(point.residence_time_s),
        "settled": point.settled,
        "unsteady": "cut short" if point.cut_short else "not steady",
        "settle": duration(point.settle_s),
        "conversion": percent(point.conversion, point.conversion_sd),
        "readings": point.readings or "–",
        "collected": number(point.collected_mL),
        "window": window,
        "status": point.status,
    }


def _residence_note(run: RunData) -> str:
    if run.rig is None:
        return ""
    from rigd.logic.flow_path import flow_path

    path = flow_path(run.rig)
    return (
        f"Residence time is the liquid volume of the packed column, {path.column_mL:.2f} mL"
        f" (of it {path.interstitial_mL:.2f} mL between the beads, the rest inside them), over the total flow."
    )


def _sensor(run: RunData, trace: Trace) -> bool:
    """True for a sensor's own tag, not for what a device reads back."""
    return run.rig is None or any(tag.id == trace.tag and tag.kind is TagKind.MEASURED for tag in run.rig.tags)


def _peak(run: RunData, trace: Trace) -> dict[str, str]:
    limits, rating = [], 0.0
    if run.rig is not None:
        limits = [
            cause.limit
            for lock in run.rig.interlocks
            for cause in lock.causes
            if cause.kind is ConditionKind.HIGH and cause.tag == trace.tag
        ]
        rating = next((tag.rating for tag in run.rig.tags if tag.id == trace.tag), 0.0)
    unit = trace.unit.replace("deg", "°")
    return {
        "tag": trace.tag,
        "title": trace.title,
        "highest": f"{number(trace.peak)} {unit}",
        "limit": f"{min(limits):g} {unit}" if limits else "–",
        "rating": f"{rating:g} {unit}" if rating else "–",
    }


def _used(run: RunData) -> list[dict[str, str]]:
    if run.rig is None:
        return []
    there = {liquid.id: 0.0 for liquid in run.rig.liquids}
    for vessel in run.rig.vessels:
        if vessel.liquid:
            there[vessel.liquid] = there.get(vessel.liquid, 0.0) + vessel.content_mL
    return [
        {
            "name": liquid.name,
            "role": liquid.role.value,
            "drawn": number(run.used_mL.get(liquid.id, math.nan), 1),
            "content": number(there[liquid.id], 0),
        }
        for liquid in run.rig.liquids
    ]


def _signed(run: RunData) -> list[dict[str, str]]:
    texts = {item.id: item.text for item in run.recipe.checklist} if run.recipe else {}
    return [
        {
            "t": clock(event.t_ns / 1e9),
            "id": event.subject,
            "who": str(event.fields.get("who", "")),
            "text": texts.get(event.subject, event.text),
        }
        for event in of_kind(run, EventKind.PROMPT)
        if event.fields.get("status") == "confirmed"
    ]


def _sheet(run: RunData) -> list[tuple[str, str]]:
    sheet = run.recipe.sheet if run.recipe else None
    if sheet is None:
        return []
    return [
        ("signed by", sheet.signed_by),
        ("safe when it stands still", "yes" if sheet.stagnation_safe else "no"),
        ("flush volumes needed", f"{sheet.flush_volumes:g}"),
        ("safe temperature", f"{sheet.safe_degC:g} °C"),
        ("highest temperature allowed", f"{sheet.limit_degC:g} °C"),
        ("highest pressure allowed", f"{sheet.limit_bar:g} bar"),
        ("adiabatic rise", f"{sheet.adiabatic_rise_K:g} K"),
        ("gas evolution", "yes" if sheet.gas_evolution else "no"),
    ]


def _permit(run: RunData) -> list[tuple[str, str]]:
    permit = run.recipe.permit if run.recipe else None
    if permit is None:
        return []
    return [
        ("approved by", permit.approved_by),
        ("number", permit.number),
        ("contacts", ", ".join(permit.contacts)),
        ("valid until", permit.end_utc),
    ]


def _provenance(run: RunData) -> list[tuple[str, str]]:
    long = {key for key, value in run.facts.items() if len(value) > 200 or "\n" in value}
    rows = [("written by", f"rigd {__version__}")]
    if run.folder:
        rows.append(("journal", str(Path(run.folder) / "run.sqlite")))
    if run.rig is not None and run.rig.digest:
        rows.append(("rig digest (SHA-256)", run.rig.digest))
    if run.recipe is not None and run.recipe.digest:
        rows.append(("recipe digest (SHA-256)", run.recipe.digest))
    return rows + [(key, value) for key, value in sorted(run.facts.items()) if key not in long]
