"""Which parts stand under the pumps' pressure together, and which of them is the weakest."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigd.model.rig import RigDefinition


@dataclass(frozen=True, slots=True)
class PressureSide:
    """Parts and lines joined by liquid behind one or more pumps, up to the vessels."""

    parts: frozenset[str]
    weakest: str
    rating_bar: float


def ratings_bar(rig: RigDefinition) -> dict[str, float]:
    """Rating of every rated part and line."""
    rated: tuple[Iterable[object], ...] = (
        rig.pumps, rig.valves, rig.tees, rig.columns, rig.cells, rig.regulators, rig.lines,
    )  # fmt: skip
    return {part.id: part.rating_bar for parts in rated for part in parts}  # type: ignore[attr-defined]


def pressure_sides(rig: RigDefinition) -> tuple[PressureSide, ...]:
    """The pressure sides of a rig. A pump's inlet is cut off from its outlet; vessels are open and end a side.

    All positions of a valve count as joined: which of them is open changes, what bursts does not.
    """
    joined = _joined(rig)
    ratings = ratings_bar(rig)
    sides: list[PressureSide] = []
    for pump in rig.pumps:
        if not any(pump.id in side.parts for side in sides):
            parts = _reached(pump.id, joined, {vessel.id for vessel in rig.vessels})
            weakest = min((part for part in parts if part in ratings), key=lambda part: (ratings[part], part))
            sides.append(PressureSide(parts, weakest, ratings[weakest]))
    return tuple(sides)


def _joined(rig: RigDefinition) -> dict[str, set[str]]:
    pumps = {pump.id for pump in rig.pumps}
    joined: dict[str, set[str]] = {}
    for line in rig.lines:
        if line.end.part in pumps:
            continue  # suction
        for part in (line.start.part, line.end.part):
            joined.setdefault(part, set()).add(line.id)
            joined.setdefault(line.id, set()).add(part)
    return joined


def _reached(start: str, joined: Mapping[str, set[str]], ends: set[str]) -> frozenset[str]:
    reached, waiting = {start}, [start]
    while waiting:
        for part in joined.get(waiting.pop(), ()):
            if part not in reached and part not in ends:
                reached.add(part)
                waiting.append(part)
    return frozenset(reached)


def side_of(sides: Iterable[PressureSide], place: str) -> PressureSide | None:
    """The pressure side on which a sensor's place (``"COL.outlet"``) lies."""
    part = place.partition(".")[0]
    return next((side for side in sides if part in side.parts), None)
