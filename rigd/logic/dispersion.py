"""How long a front takes through the whole path: residence times and variances add up along a series of segments.

Tubes after Taylor and Aris, D_e = D + R^2 u^2 / (48 D), where ``development`` says that this holds; packed beds by
Bo = u L / D_L = 0.5 L / d_p (simple design rule for liquids, plateau of Delgado, Heat Mass Transfer 42 (2006) 279);
tees and cells as mixed volumes. The sum is read as N tanks in series with the same mean and variance (Levenspiel,
Chemical Reaction Engineering, ch. 14).
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from rigd.logic.flow_path import Segment
from rigd.logic.student import gamma_quantile
from rigd.model.recipe import Point

if TYPE_CHECKING:
    from rigd.logic.conduct.layout import Layout

DIFFUSIVITY_M2_S = 1e-9
"""Of a small molecule in an organic solvent, order of magnitude."""


DEVELOPED = 0.8
"""D tau/R^2 from which Taylor-Aris holds: V. Ananthakrishnan, W. N. Gill, A. J. Barduhn, AIChE J. 11 (1965) 1063-1072
(from memory); below it a front has a sharp head and a long tail, nearer to pure convection."""


def development(segment: Segment, flow_mL_min: float) -> float:
    """D tau/R^2 of a tube: how far radial diffusion has evened out the profile of laminar flow."""
    tau_s = 60.0 * segment.volume_mL / flow_mL_min
    return DIFFUSIVITY_M2_S * tau_s / (segment.bore_mm / 2e3) ** 2


def undeveloped(layout: Layout, point: Point) -> dict[str, float]:
    """The tubes where Taylor-Aris does not hold at this point's flows, with their D tau/R^2."""
    found = {}
    for section in layout.path.sections:
        flow = sum(point.flows_mL_min.get(pump, 0.0) for pump in section.pumps)
        for segment in section.segments:
            if segment.kind == "line" and segment.bore_mm > 0 and flow > 0:
                number = development(segment, flow)
                if number < DEVELOPED:
                    found[segment.id] = number
    return found


def relative_variance(segment: Segment, flow_mL_min: float, bead_mm: float = 0.0) -> float:
    """Variance of the residence time in one segment over the square of its mean; 1 is a mixed tank."""
    if segment.kind == "column" and bead_mm > 0:
        return min(1.0, 2.0 * bead_mm / (0.5 * segment.length_mm))
    if segment.kind == "line" and segment.bore_mm > 0 and segment.length_mm > 0:
        radius_m, length_m = segment.bore_mm / 2e3, segment.length_mm / 1e3
        speed = flow_mL_min / 60e6 / (math.pi * radius_m**2)
        spread = DIFFUSIVITY_M2_S + radius_m**2 * speed**2 / (48.0 * DIFFUSIVITY_M2_S)
        return min(1.0, 2.0 * spread / (speed * length_m)) if speed > 0 else 1.0
    return 1.0


def tanks(layout: Layout, point: Point) -> float:
    """Number of equal tanks in series that spread a front as the trunk does at this point's flows."""
    beads = {column.id: column.packing.bead_diameter_mm for column in layout.rig.columns}
    mean_s = variance_s2 = 0.0
    for section in layout.path.sections:
        flow = sum(point.flows_mL_min.get(pump, 0.0) for pump in section.pumps)
        for segment in section.segments:
            tau_s = 60.0 * segment.volume_mL / flow if flow > 0 else 0.0
            mean_s += tau_s
            variance_s2 += relative_variance(segment, flow, beads.get(segment.id, 0.0)) * tau_s**2
    return mean_s**2 / variance_s2 if variance_s2 > 0 else math.inf


def settle_volumes_99(layout: Layout, point: Point) -> float:
    """Volumes of the trunk after which a front has come to 99 %."""
    number = tanks(layout, point)
    return gamma_quantile(0.99, number) if math.isfinite(number) else 1.0
