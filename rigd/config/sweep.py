"""From the sweep as written to the points in the order in which they are run."""

from __future__ import annotations

import random
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from rigd.config.sweep_tables import FlowRangeTable, SweepTable, TimeRangeTable
from rigd.logic.flow_path import FlowPath
from rigd.model.recipe import Point, PointKind

Flows = Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Condition:
    """One combination of flows; ``swept`` is the number that ``order`` sorts by: flow, or residence time."""

    flows_mL_min: Flows
    swept: float


def expand(sweep: SweepTable, path: FlowPath, solvent_only: bool) -> tuple[Point, ...]:
    """The points of a sweep, in order, with returns and blanks. Without reagent all of them are blanks."""
    temperatures = sweep.temperature if isinstance(sweep.temperature, tuple) else (sweep.temperature,)
    conditions = conditions_of(sweep, path)
    chance = random.Random(sweep.seed)
    kind = PointKind.BLANK if solvent_only else PointKind.POINT
    made: list[Point] = []
    for temperature in temperatures:
        ordered = _ordered(sweep, [*conditions] * sweep.repeats, chance)
        _block(sweep, ordered, temperature, kind, made)
    return tuple(made)


def conditions_of(sweep: SweepTable, path: FlowPath) -> tuple[Condition, ...]:
    """The combinations of flows as written, each once, in the order written."""
    if sweep.points is not None:
        return tuple(Condition(flows, sum(flows.values())) for flows in sweep.points)
    found: list[Condition] = []
    for ratio in _ratios(sweep, path):
        shares = {pump: share / sum(ratio.values()) for pump, share in ratio.items()}
        for swept in _values(sweep.total_flow if sweep.residence_time is None else sweep.residence_time):
            total = swept if sweep.residence_time is None else total_mL_min(path, shares, swept)
            found.append(Condition({pump: total * share for pump, share in shares.items()}, swept))
    return tuple(found)


def total_mL_min(path: FlowPath, shares: Mapping[str, float], residence_s: float) -> float:
    """Total flow at which the liquid of all columns is renewed in ``residence_s``.

    A column is passed by the pumps that have merged before it: the time is the sum of V / (share Q) over the columns,
    with V the liquid between and inside the beads (definition of the mean residence time; common practice, no source).
    """
    weighted_mL = 0.0
    for section in path.sections:
        liquid_mL = sum(segment.volume_mL for segment in section.segments if segment.kind == "column")
        if liquid_mL > 0:
            weighted_mL += liquid_mL / sum(shares.get(pump, 0.0) for pump in section.pumps)
    return 60.0 * weighted_mL / residence_s


def _ratios(sweep: SweepTable, path: FlowPath) -> Sequence[Mapping[str, float]]:
    if sweep.ratio is None:
        return [{feed.pump: 1.0 for feed in path.feeds}]
    return sweep.ratio if isinstance(sweep.ratio, tuple) else [sweep.ratio]


def _values(written: float | tuple[float, ...] | FlowRangeTable | TimeRangeTable | None) -> Sequence[float]:
    if isinstance(written, FlowRangeTable | TimeRangeTable):
        return _spaced(written)
    if isinstance(written, tuple):
        return written
    return [] if written is None else [written]


def _spaced(written: FlowRangeTable | TimeRangeTable) -> list[float]:
    first, last, steps = written.from_, written.to, written.count - 1
    if written.spacing == "geometric":
        inner = [first * (last / first) ** (i / steps) for i in range(1, steps)]
    else:
        inner = [first + (last - first) * i / steps for i in range(1, steps)]
    return [first, *inner, last]


def _ordered(sweep: SweepTable, conditions: list[Condition], chance: random.Random) -> list[Condition]:
    if sweep.order == "random":
        chance.shuffle(conditions)
        return conditions
    if sweep.order == "given":
        return conditions
    return sorted(conditions, key=lambda condition: condition.swept, reverse=sweep.order == "descending")


def _block(
    sweep: SweepTable, ordered: Sequence[Condition], temperature: float, kind: PointKind, made: list[Point]
) -> None:
    """The points of one temperature, with returns to its first point and, at the fastest flows, blanks in between."""
    first: Point | None = None
    fastest = max(ordered, key=lambda condition: sum(condition.flows_mL_min.values()))
    numbered = sum(1 for point in made if point.of == "" and point.id.startswith("P"))
    blanks = sum(1 for point in made if point.id.startswith("blank-"))
    returns = 0
    for count, condition in enumerate(ordered, start=1):
        point = Point(f"P{numbered + count:02d}", kind, condition.flows_mL_min, temperature)
        first = first or point
        made.append(point)
        if sweep.return_every and count % sweep.return_every == 0:
            returns += 1
            made.append(
                Point(f"{first.id}-return-{returns}", PointKind.RETURN, first.flows_mL_min, temperature, first.id)
            )
        if sweep.blank_every and count % sweep.blank_every == 0:
            blanks += 1
            made.append(Point(f"blank-{blanks}", PointKind.BLANK, fastest.flows_mL_min, temperature))
