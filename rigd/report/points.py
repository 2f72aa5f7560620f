"""What became of each point, from the POINT events and the readings taken while it was collected."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from rigd.model.events import Event, EventKind
from rigd.model.recipe import Point, Recipe
from rigd.model.rig import RigDefinition
from rigd.report.data import PointRow, Trace

NAN = float("nan")
SETTLED, UNSETTLED, COLLECTING, COLLECTED = "settled", "unsettled", "collecting", "collected"


def point_rows(
    events: Sequence[Event], traces: Mapping[str, Trace], rig: RigDefinition | None, recipe: Recipe | None
) -> tuple[PointRow, ...]:
    """One row per point that was begun, in the order they were begun."""
    told: dict[str, list[Event]] = {}
    for event in events:
        if event.kind is EventKind.POINT:
            told.setdefault(event.subject, []).append(event)
    planned = {point.id: point for point in recipe.points} if recipe else {}
    signal = traces.get(recipe.settle.signal) if recipe else None
    before_s = judged_s(rig, recipe)
    return tuple(_row(name, story, planned.get(name), rig, signal, before_s) for name, story in told.items())


def judged_s(rig: RigDefinition | None, recipe: Recipe | None) -> float:
    """How long before it was declared steady the signal was quiet: the samples in a row that the rule asked for [s]."""
    if rig is None or recipe is None:
        return 0.0
    period_ns = next((tag.period_ns for tag in rig.tags if tag.id == recipe.settle.signal), 0)
    return recipe.settle.persistence * period_ns / 1e9


def _row(
    name: str,
    story: Sequence[Event],
    plan: Point | None,
    rig: RigDefinition | None,
    signal: Trace | None,
    before_s: float,
) -> PointRow:
    facts: dict[str, str | float | int | bool] = {}
    for event in story:
        facts.update(event.fields)
    times = {str(event.fields.get("status", "")): event.t_ns / 1e9 for event in story}
    steady_s = times.get(SETTLED, times.get(UNSETTLED, NAN))
    flows = dict(plan.flows_mL_min) if plan else _flows(facts)
    collected_mL = _number(facts, "collected_mL")
    end_s = times.get(COLLECTED, NAN)
    start_s = times.get(COLLECTING, end_s - 60.0 * collected_mL / (sum(flows.values()) or NAN))
    conversion, scatter, readings = _conversion(signal, steady_s - before_s, end_s)
    return PointRow(
        id=name,
        kind=plan.kind.value if plan else str(facts.get("kind", "point")),
        flows_mL_min=flows,
        temperature_degC=plan.temperature_degC if plan else _number(facts, "temperature_degC"),
        residence_time_s=_residence_time_s(facts, flows, rig),
        status=str(story[-1].fields.get("status", "")),
        settled=SETTLED in times and UNSETTLED not in times,
        settle_s=_number(facts, "settle_s", steady_s - story[0].t_ns / 1e9),
        conversion=_number(facts, "conversion", conversion),
        conversion_sd=scatter,
        readings=readings,
        collected_mL=collected_mL,
        collect_start_s=start_s,
        collect_end_s=end_s,
        selectivity=_number(facts, "selectivity"),
        bed_degC=_number(facts, "temperature_degC"),
    )


def _number(facts: Mapping[str, str | float | int | bool], key: str, otherwise: float = NAN) -> float:
    value = facts.get(key)
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else otherwise


def _flows(facts: Mapping[str, str | float | int | bool]) -> dict[str, float]:
    """Flows told in the event as ``<pump>.flow_mL_min``, for a run whose recipe can no longer be read."""
    ending = ".flow_mL_min"
    return {key.removesuffix(ending): _number(facts, key) for key in facts if key.endswith(ending)}


def _conversion(signal: Trace | None, steady_s: float, end_s: float) -> tuple[float, float, int]:
    """Mean and standard deviation of the signal while it was steady, and from how many readings."""
    if signal is None or signal.measures != "fraction" or not math.isfinite(steady_s):
        return NAN, NAN, 0
    seen = signal.between(steady_s, end_s if math.isfinite(end_s) else math.inf)
    if not seen.size:
        return NAN, NAN, 0
    seen = seen[np.insert(np.diff(seen) != 0.0, 0, True)]  # a spectrum that was read twice counts once
    return float(seen.mean()), float(np.std(seen, ddof=1)) if seen.size > 1 else NAN, int(seen.size)


def _residence_time_s(
    facts: Mapping[str, str | float | int | bool], flows: Mapping[str, float], rig: RigDefinition | None
) -> float:
    told = _number(facts, "residence_time_s")
    total = sum(flows.values())
    if math.isfinite(told) or rig is None or total <= 0:
        return told
    from rigd.logic.flow_path import flow_path

    return 60.0 * flow_path(rig).column_mL / total
