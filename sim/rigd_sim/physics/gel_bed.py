"""Swelling of a gel resin in a column of fixed volume.

The settled bed of volume V_dry swells to V_dry q, q the swelling ratio. While it fits into the column, its voidage
is that of
settled spheres and only its length grows; beads grow as q^(1/3). When it does not fit, the beads fill the voids:
voidage falls as

    e = 1 - (1 - e0) V_dry q / V_column        (not below ``SQUEEZED_MIN``: deformed gel still lets some liquid pass)

and the resistance (1-e)^2/e^3 runs away. Known from practice: pack swollen, or leave room (common practice, no source);
swelling figures: F. Z. Doerwald, Organic Synthesis on Solid Phase, 2nd ed. 2002, ch. 1 (from memory, +-15 %).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

SQUEEZED_MIN = 0.03


@dataclass(frozen=True, slots=True)
class Settled:
    """Geometry of the bed at one swelling ratio: voidage, bed length [m], bead diameter [m]."""

    voidage: float
    length: float
    bead_diameter: float


def settled(
    ratio: float, full_ratio: float, dry_volume: float, column_volume: float, column_length: float,
    voidage: float, bead_diameter: float,
) -> Settled:  # fmt: skip
    """Geometry at swelling ``ratio`` (wet/dry); ``bead_diameter`` and ``voidage`` are declared at ``full_ratio``."""
    wanted = dry_volume * ratio
    diameter = bead_diameter * (ratio / full_ratio) ** (1.0 / 3.0)
    if wanted <= column_volume:
        return Settled(voidage, column_length * wanted / column_volume, diameter)
    squeezed = 1.0 - (1.0 - voidage) * wanted / column_volume
    return Settled(max(squeezed, SQUEEZED_MIN), column_length, diameter)


def relax(ratio: float, target: float, dt: float, time_constant: float) -> float:
    """First-order approach of the swelling ratio to its target."""
    return target + (ratio - target) * math.exp(-dt / max(time_constant, 1e-6))
