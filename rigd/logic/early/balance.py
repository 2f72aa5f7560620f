"""Is what arrives what was pumped? Flow sensors against the pumps upstream, levels and balances against the ledger."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from statistics import median

from rigd.logic.early.scene import Scene
from rigd.logic.protect.ledger import Ledger
from rigd.model.rig import RigDefinition, Tag, TagKind

SETTLE_S = 30.0
LOOKS = 3
SMALLEST_ML = 2.0
"""A level is judged over this much pumped, or twenty times its noise (common practice, no source)."""


@dataclass(frozen=True, slots=True)
class Meter:
    """A sensor of a flow, with the pumps upstream of it; or of the volume in a vessel, with how much is judged."""

    tag: str
    pumps: tuple[str, ...] = ()
    vessel: str = ""
    least_mL: float = 0.0


@dataclass(frozen=True, slots=True)
class Compared:
    """Last ratios of a flow sensor, or the reading and the ledger [mL] at which a level was last judged."""

    looks: tuple[float, ...] = ()
    read_mL: float | None = None
    counted_mL: float = 0.0


def meters(rig: RigDefinition, pumps_at: Mapping[str, tuple[str, ...]]) -> tuple[Meter, ...]:
    """All of them. ``pumps_at`` tells whose flow passes a part."""
    vessels = {vessel.id for vessel in rig.vessels}
    found = []
    for tag in rig.tags:
        part = tag.at.partition(".")[0]
        if tag.kind is not TagKind.MEASURED:
            continue
        if tag.measures == "flow" and part in pumps_at:
            found.append(Meter(tag.id, pumps_at[part]))
        elif tag.measures == "volume" and part in vessels:
            found.append(Meter(tag.id, vessel=part, least_mL=_least_mL(tag)))
    return tuple(found)


def _least_mL(tag: Tag) -> float:
    return max(SMALLEST_ML, 20.0 * tag.noise)


def compare_flow(scene: Scene, meter: Meter, known: Compared) -> tuple[Compared, float | None]:
    """Measured over pumped, of three looks at a steady flow."""
    pumped = sum(scene.flows.get(pump, 0.0) for pump in meter.pumps)
    read = scene.mean(meter.tag)
    if read is None or pumped <= 0.0 or scene.steady_s < SETTLE_S:
        return Compared(), None
    looks = (*known.looks[1 - LOOKS :], read / pumped)
    return Compared(looks), median(looks) if len(looks) == LOOKS else None


def compare_level(meter: Meter, known: Compared, read_mL: float, ledger: Ledger) -> tuple[Compared, float | None]:
    """Change of the reading over change of the ledger, once enough has been moved."""
    counted_mL = ledger.vessels.get(meter.vessel, 0.0)
    if known.read_mL is None:
        return Compared((), read_mL, counted_mL), None
    moved_mL = counted_mL - known.counted_mL
    if abs(moved_mL) < meter.least_mL:
        return known, None
    return Compared((), read_mL, counted_mL), (read_mL - known.read_mL) / moved_mL
