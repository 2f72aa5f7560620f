"""What one look at the rig shows: steady flows, mean pressures, temperatures, which liquid is on its way.

Everything comes from the image and the ledger of protect; nothing from the recipe.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.early.path import Piece, Stretch
from rigd.logic.early.viscosity import viscosity_mPa_s
from rigd.logic.protect.ledger import Content, Ledger
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

LOOK_NS = 5_000_000_000
"""Time between two looks; a mean is taken over as much of it as the recent past holds."""
SAME_FLOW = 0.02
SMALLEST_FLOW_ML_MIN = 0.002

Mixture = tuple[tuple[str, str], ...]
"""What is in the active syringes: pump and liquid."""
SOLVENT, UNKNOWN = "", "unknown"
"""Solvent for certain; a liquid of which nothing is known."""


@dataclass(frozen=True, slots=True)
class Course:
    """How long things have been as they are: flows since ``since_ns``, liquids since ``since_mL`` were delivered."""

    flows: Mapping[str, float]
    since_ns: int
    mixture: Mixture = ()
    since_mL: float = 0.0
    outlet: str = ""


@dataclass(frozen=True, slots=True)
class Predicted:
    """Pressure drop by geometry [bar]: of the lines, least and most (the temperature behind a bed is not known), and of
    the beds."""

    cold_low: float
    cold_high: float
    warm: float

    @property
    def cold(self) -> float:
        """The middle for the lines."""
        return (self.cold_low + self.cold_high) / 2.0


NOTHING_FLOWS = Predicted(0.0, 0.0, 0.0)


@dataclass(frozen=True, slots=True)
class Scene:
    """One look. ``steady_s`` is how long flows and outlet have stood, ``passed_mL`` what was delivered since the
    liquids changed."""

    program: Program
    samples: Mapping[str, Sample]
    rings: Mapping[str, tuple[Sample, ...]]
    flows: Mapping[str, float]
    mixture: Mixture
    solvent: bool
    steady_s: float
    passed_mL: float
    now_ns: int

    def mean(self, tag: str) -> float | None:
        """Mean of a tag since the last look, or of its last two samples; ``None`` when it cannot be believed."""
        period_ns = self.program.tags[tag].period_ns
        since_ns = self.now_ns - max(LOOK_NS, 2 * period_ns)
        values = [s.value for s in self.rings.get(tag, ()) if s.t_ns > since_ns and s.quality is Quality.GOOD]
        return sum(values) / len(values) if values and self.value(tag) is not None else None

    def value(self, tag: str) -> float | None:
        """The last value of a tag; ``None`` when it is not good."""
        sample = self.samples.get(tag)
        return sample.value if sample is not None and sample.quality is Quality.GOOD else None

    def predicted(self, stretch: Stretch) -> Predicted:
        """What the geometry of a stretch says, at the present flows and temperatures, of the rig's solvent."""
        low = high = warm = 0.0
        for piece in stretch.pieces:
            flow = sum(self.flows.get(pump, 0.0) for pump in piece.pumps)
            least, most = self._viscosity(piece)
            if piece.bed:
                warm += piece.per_flow * least * flow
            else:
                low += piece.per_flow * least * flow
                high += piece.per_flow * most * flow
        return Predicted(low, high, warm)

    def _viscosity(self, piece: Piece) -> tuple[float, float]:
        plan = self.program.early
        if plan.viscosity is None:
            return 1.0, 1.0
        warm = next((value for tag in piece.warm if (value := self.value(tag)) is not None), plan.room_degC)
        there = viscosity_mPa_s(plan.viscosity, warm)
        room = there if piece.bed or not piece.warm else viscosity_mPa_s(plan.viscosity, plan.room_degC)
        return min(there, room), max(there, room)


def look(
    program: Program,
    course: Course,
    samples: Mapping[str, Sample],
    rings: Mapping[str, tuple[Sample, ...]],
    ledger: Ledger,
    now_ns: int,
) -> tuple[Course, Scene | None]:
    """The course of things and the scene; no scene while a flow cannot be read, nothing flows or the outlet is shut."""
    flows = _flows(program, samples)
    if flows is None:
        return replace(course, since_ns=now_ns), None
    delivered_mL = sum(ledger.delivered.values())
    same = ledger.outlet == course.outlet and all(_same(flow, course.flows.get(p, 0.0)) for p, flow in flows.items())
    mixture = _mixture(program, ledger, course.mixture)
    moved = course.mixture != mixture
    course = Course(
        course.flows if same else flows,
        course.since_ns if same else now_ns,
        mixture,
        delivered_mL if moved else course.since_mL,
        ledger.outlet,
    )
    if not any(flow > 0 for flow in flows.values()) or not ledger.outlet:
        return course, None
    solvent, steady_s = all(liquid == SOLVENT for _, liquid in mixture), (now_ns - course.since_ns) / 1e9
    passed_mL = delivered_mL - course.since_mL
    scene = Scene(program, samples, rings, flows, mixture, solvent, steady_s, passed_mL, now_ns)
    return course, scene


def _flows(program: Program, samples: Mapping[str, Sample]) -> dict[str, float] | None:
    flows = {}
    for pump in program.pumps:
        sample = samples.get(program.feedback.get((pump, "flow"), ""))
        if sample is None or sample.quality is not Quality.GOOD:
            return None
        flows[pump] = max(sample.value, 0.0)
    return flows


def _same(flow: float, held: float) -> bool:
    return abs(flow - held) <= max(SAME_FLOW * max(flow, held), SMALLEST_FLOW_ML_MIN)


def _mixture(program: Program, ledger: Ledger, before: Mixture) -> Mixture:
    """The liquid in the active syringe of each pump; of an empty one, what it held before."""
    held, found = dict(before), []
    for pump in program.pumps:
        count, source = ledger.counts.get(pump), ledger.sources.get(pump)
        liquid = UNKNOWN if source is None or source.last is None else source.last.liquid
        if count is None or count.active is Content.EMPTY:
            liquid = held.get(pump, UNKNOWN)
        elif count.active is Content.SOLVENT:
            liquid = SOLVENT
        found.append((pump, liquid))
    return tuple(found)
