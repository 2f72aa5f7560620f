"""Compliance of the path, measured whenever a flow meets a shut outlet: C = Q / (dP/dt).

That is the leak test of every start. Gas in the path makes it larger (V/P of the gas); a stiffer path than stated
leaves less time between trip limit and rating than was reckoned with.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigd.logic.protect.conditions import slope_per_s
from rigd.logic.protect.ledger import Ledger
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

FEWEST = 5
SMALLEST_RISE_BAR = 0.5
STRAIGHT = (0.25, 0.9)
"""The part of a rise that is judged: neither the start of the pump nor its end."""
LONGEST = 400


@dataclass(frozen=True, slots=True)
class Rise:
    """A rise that goes on: the flow that makes it [mL/min] and the pressures (ns, bar) so far."""

    flow_mL_min: float = 0.0
    points: tuple[tuple[int, float], ...] = ()


NO_RISE = Rise()


def follow(
    program: Program, rise: Rise, samples: Mapping[str, Sample], ledger: Ledger, changed: Mapping[str, Sample]
) -> tuple[Rise, float | None]:
    """Follow the pressure while the outlet is shut; at the end of the rise its compliance [mL/bar], else ``None``."""
    plan = program.early
    flow = _flow(program, samples) if shut(program, samples) else 0.0
    if flow <= 0.0 or (rise.flow_mL_min and abs(flow - rise.flow_mL_min) > 0.02 * flow):
        primed = sum(ledger.delivered.values()) >= plan.wetted_mL
        return NO_RISE, compliance_mL_bar(rise) if rise.points and primed else None
    sample = changed.get(plan.stiff)
    if sample is None or sample.quality is not Quality.GOOD:
        return rise, None
    return replace(rise, flow_mL_min=flow, points=(*rise.points, (sample.t_ns, sample.value))[-LONGEST:]), None


def shut(program: Program, samples: Mapping[str, Sample]) -> bool:
    """True when the outlet valve reports a position that leads nowhere."""
    valve = program.path.outlet_valve
    sample = samples.get(program.feedback.get((valve, "position"), ""))
    if sample is None or sample.quality is Quality.BAD:
        return False
    positions, index = program.valves[valve].positions, int(sample.value)
    return 0 <= index < len(positions) and program.drain.get(positions[index], "") == ""


def compliance_mL_bar(rise: Rise) -> float | None:
    """Q over the slope of the straight part of a rise; ``None`` when it is too small or too short to say."""
    highest, lowest = max(bar for _, bar in rise.points), min(bar for _, bar in rise.points)
    top = lowest + STRAIGHT[1] * (highest - lowest)
    bottom = lowest + STRAIGHT[0] * (highest - lowest)
    straight = tuple(point for point in rise.points if bottom <= point[1] <= top)
    if highest - lowest < SMALLEST_RISE_BAR or len(straight) < FEWEST:
        return None
    slope = slope_per_s(straight)
    return rise.flow_mL_min / 60.0 / slope if slope > 0 else None


def _flow(program: Program, samples: Mapping[str, Sample]) -> float:
    total = 0.0
    for pump in program.pumps:
        sample = samples.get(program.feedback.get((pump, "flow"), ""))
        total += sample.value if sample is not None and sample.quality is Quality.GOOD else 0.0
    return total
