"""Where the liquid is: residence times and front positions from integrated flow.

The liquid that leaves a volume V at time t entered it at the time t' for which the flow integrated from t' to t is V;
exact for plug flow and any flow over time (the mapping of Moore & Jensen, Angew. Chem. Int. Ed. 53 (2014) 470). Flow is
integrated by the pumps' own counters of delivered volume, so nothing drifts.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from rigd.logic.flow_path import Feed, FlowPath, Segment

_STRAIGHT_mL = 2e-4
_LONGEST_NS = 60_000_000_000


@dataclass(frozen=True, slots=True)
class FlowHistory:
    """Volume that has passed, over time: a polyline of (ns, mL), as long as the last ``keep_mL`` need it."""

    keep_mL: float
    knots: tuple[tuple[int, float], ...] = ()

    def add(self, t_ns: int, passed_mL: float) -> FlowHistory:
        """Take a counter reading; readings that go back in time are ignored."""
        knots = self.knots
        if knots and t_ns <= knots[-1][0]:
            return self
        if len(knots) > 1 and _on_the_way(knots[-2], knots[-1], (t_ns, passed_mL)):
            knots = knots[:-1]
        knots = (*knots, (t_ns, passed_mL))
        return FlowHistory(self.keep_mL, _trimmed(knots, passed_mL - self.keep_mL))

    def volume_at(self, t_ns: int) -> float:
        """Volume that had passed at a time inside the memory (clamped to it)."""
        if not self.knots:
            return 0.0
        for (t0, v0), (t1, v1) in zip(reversed(self.knots[:-1]), reversed(self.knots[1:]), strict=True):
            if t_ns >= t1:
                return v1
            if t_ns >= t0:
                return v0 + (v1 - v0) * (t_ns - t0) / (t1 - t0)
        return self.knots[0][1]

    def time_at(self, passed_mL: float) -> int | None:
        """The last time at which not more than this had passed; ``None`` before the memory."""
        if not self.knots or passed_mL < self.knots[0][1]:
            return None
        for (t0, v0), (t1, v1) in zip(reversed(self.knots[:-1]), reversed(self.knots[1:]), strict=True):
            if passed_mL >= v1:
                return t1
            if passed_mL >= v0:
                return t0 + round((t1 - t0) * (passed_mL - v0) / (v1 - v0))
        return self.knots[0][0]

    def entered_ns(self, left_ns: int, volume_mL: float) -> int | None:
        """When the liquid that leaves a volume at ``left_ns`` entered it; ``None`` when that is not remembered."""
        return self.time_at(self.volume_at(left_ns) - volume_mL)


def _on_the_way(a: tuple[int, float], b: tuple[int, float], c: tuple[int, float]) -> bool:
    """True when b lies on the straight line from a to c, so that it need not be kept."""
    if c[0] - a[0] > _LONGEST_NS:
        return False
    expected = a[1] + (c[1] - a[1]) * (b[0] - a[0]) / (c[0] - a[0])
    return abs(b[1] - expected) <= _STRAIGHT_mL


def _trimmed(knots: tuple[tuple[int, float], ...], oldest_mL: float) -> tuple[tuple[int, float], ...]:
    first = 0
    while first + 2 < len(knots) and knots[first + 1][1] < oldest_mL:
        first += 1
    return knots[first:]


def residences_s(
    path: FlowPath, histories: tuple[FlowHistory, ...], part: str, now_ns: int
) -> Mapping[str, float] | None:
    """Time that the liquid now leaving ``part`` spent in each segment of the trunk up to there [s], by segment id.

    ``histories`` belong to the sections of the path, in order. ``None`` when the liquid is older than the memory.
    """
    found: dict[str, float] = {}
    left_ns = now_ns
    for segment, history in reversed(_up_to(path, histories, part)):
        entered_ns = history.entered_ns(left_ns, segment.volume_mL)
        if entered_ns is None:
            return None
        found[segment.id] = (left_ns - entered_ns) / 1e9
        left_ns = entered_ns
    return found


def _up_to(path: FlowPath, histories: tuple[FlowHistory, ...], part: str) -> list[tuple[Segment, FlowHistory]]:
    chosen: list[tuple[Segment, FlowHistory]] = []
    for section, history in zip(path.sections, histories, strict=True):
        for segment in section.segments:
            chosen.append((segment, history))
            if segment.id == part:
                return chosen
    return chosen


@dataclass(frozen=True, slots=True)
class Front:
    """The face of a new liquid, from the syringe on. ``start_mL`` is the pump's counter when it began to leave."""

    liquid: str
    start_mL: float

    def travelled_mL(self, delivered_mL: float) -> float:
        """How far it is from the syringe along the feed."""
        return max(0.0, delivered_mL - self.start_mL)

    def to_merge_mL(self, feed: Feed, delivered_mL: float) -> float:
        """What this pump must still deliver until the front is at its merge; 0 once it is there."""
        return max(0.0, feed.outlet_mL - self.travelled_mL(delivered_mL))


def place_on_trunk(path: FlowPath, travelled_mL: float) -> str:
    """The segment of the trunk in which a front is after this volume from the first merge; the outlet valve behind."""
    passed = 0.0
    for segment in path.trunk:
        passed += segment.volume_mL
        if travelled_mL < passed:
            return segment.id
    return path.outlet_valve


def turnovers(path: FlowPath, delivered_mL: Mapping[str, float]) -> float:
    """How often the trunk has been exchanged when each pump has delivered this much.

    For one section it is volume over volume; sections with flows of their own add their residence times.
    """
    inverse = 0.0
    for section in path.sections:
        passed = sum(delivered_mL.get(pump, 0.0) for pump in section.pumps)
        if passed <= 0.0:
            return 0.0
        inverse += section.volume_mL / passed
    return 1.0 / inverse if inverse > 0 else 0.0
