"""What is said of a point, in whole sentences."""

from __future__ import annotations

import math

from rigd.logic.conduct.wants import PointResult, event
from rigd.model.events import Event, EventKind
from rigd.model.recipe import Point

_VERDICTS = {
    "few": "too few samples came in",
    "frozen": "the signal does not move at all",
    "moving": "the ratio test still sees a change",
    "unproven": "the change to be expected could not be shown to be small enough",
    "steady": "it was not quiet for long enough",
}


def started(point: Point, t_ns: int) -> Event:
    """The flows of the point are being set."""
    flows = ", ".join(f"{pump} {flow:.3g}" for pump, flow in sorted(point.flows_mL_min.items()))
    text = f"Point {point.id} begins: {flows} mL/min at {point.temperature_degC:g} degC."
    return event(EventKind.POINT, point.id, t_ns, text, status="started", kind=str(point.kind))


def settled_event(point: Point, mean: float, volumes: float, since_ns: int, t_ns: int) -> Event:
    """Both gates have passed."""
    settle_s = round((t_ns - since_ns) / 1e9, 3)
    text = f"Point {point.id} is settled after {settle_s:.0f} s and {volumes:.2f} volumes."
    fields: dict[str, str | float] = {"status": "settled", "settle_s": settle_s, "volumes": round(volumes, 4)}
    if math.isfinite(mean):
        fields["signal"] = round(mean, 6)
    return event(EventKind.POINT, point.id, t_ns, text, **fields)


def unsettled_event(point: Point, verdict: str, volumes: float, t_ns: int) -> Event:
    """The longest wait is over and the signal is not shown to be steady."""
    why = _VERDICTS.get(verdict, verdict)
    text = f"Point {point.id} did not settle within the volumes allowed: {why}."
    return event(EventKind.POINT, point.id, t_ns, text, status="unsettled", verdict=verdict, volumes=round(volumes, 4))


def collected(result: PointResult, t_ns: int) -> Event:
    """The fraction is complete and the outlet back at waste."""
    text = f"Point {result.id}: {result.collected_mL:.3f} mL collected."
    return event(EventKind.POINT, result.id, t_ns, text, status="collected", **_numbers(result))


def abandoned(result: PointResult, t_ns: int) -> Event:
    """Nothing was collected of this point."""
    return event(EventKind.POINT, result.id, t_ns, f"Point {result.id} is abandoned.", status="abandoned")


def interrupted(result: PointResult, t_ns: int) -> Event:
    """A hold or stop came while the fraction was being collected; this much of it is in the flask."""
    text = f"Point {result.id} was broken off; {result.collected_mL:.3f} mL of it are in the flask."
    return event(EventKind.POINT, result.id, t_ns, text, status="abandoned", collected_mL=round(result.collected_mL, 4))


def _numbers(result: PointResult) -> dict[str, float | bool]:
    values = {
        "conversion": result.conversion,
        "temperature_degC": result.temperature_degC,
        "residence_time_s": result.residence_time_s,
        "collected_mL": result.collected_mL,
        "settle_s": result.settle_s,
        **result.values,
    }
    numbers: dict[str, float | bool] = {key: round(value, 6) for key, value in values.items() if math.isfinite(value)}
    numbers["settled"] = result.settled
    return numbers
