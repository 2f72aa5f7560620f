"""What lies between the sensors: the stretches of the flow path whose resistance can be watched.

A stretch runs from a pressure sensor to the next one downstream, the last to the outlet. Its pieces resist by their
declared geometry: tubes after Hagen and Poiseuille, beds after Ergun's viscous term (S. Ergun, Chem. Eng. Prog. 48
(1952) 89) or Carman and Kozeny's 180. This is where learning starts, not what is judged by.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigd.logic.flow_path import FlowPath
from rigd.model.protection import ConditionKind
from rigd.model.rig import Column, Line, RigDefinition, Tag, TagKind

ML_MIN_M3_S = 1e-6 / 60.0
RESOLUTION = 0.0025
"""What a difference of two pressures is worth at best, of span (zero and its drift; common practice, no source)."""
KEPT = 0.05
"""What a back-pressure regulator keeps more or less from one flow to another, of its set pressure (common practice, no
source)."""
OUTLET = ""


@dataclass(frozen=True, slots=True)
class Piece:
    """One part: bar per (mPa s * mL/min), the pumps whose flow passes it, and the tags of its temperature.

    Without such a tag it has the room's; a line behind a ``bed`` is somewhere between the bed's and the room's.
    """

    part: str
    per_flow: float
    pumps: tuple[str, ...]
    warm: tuple[str, ...] = ()
    bed: bool = False


@dataclass(frozen=True, slots=True)
class Stretch:
    """From the sensor ``upper`` to ``lower`` (``OUTLET``: the end). ``kept_bar`` is what regulators in it keep.

    ``band_bar`` is what the difference of the two is worth. ``limits`` are the trip limits [bar] of the sensors that
    rise with it: its own and those upstream. ``columns`` are the packed parts in it.
    """

    upper: str
    lower: str
    pieces: tuple[Piece, ...]
    pumps: tuple[str, ...]
    kept_bar: float
    band_bar: float
    limits: tuple[tuple[str, float], ...]
    columns: tuple[str, ...] = ()

    @property
    def words(self) -> str:
        """What a person calls it."""
        parts = f" ({', '.join(self.columns)})" if self.columns else ""
        return f"from {self.upper} to {self.lower or 'the outlet'}{parts}"


def stretches(rig: RigDefinition, path: FlowPath) -> tuple[Stretch, ...]:
    """All stretches in the direction of flow; none for a rig without a pressure sensor on its trunk."""
    chain = trunk_parts(rig, path)
    sensors = sorted(_pressure_sensors(rig, chain), key=lambda found: found[0])
    found = []
    for number, (start, tag) in enumerate(sensors):
        end, lower = sensors[number + 1] if number + 1 < len(sensors) else (len(chain), None)
        parts = chain[start:end]
        pieces = tuple(piece for part in parts if (piece := _piece(rig, path, part, chain)) is not None)
        kept_bar = sum(one.set_bar for one in rig.regulators if one.id in parts)
        if not pieces:
            continue
        upstream = [sensor for _, sensor in sensors[: number + 1]]
        found.append(
            Stretch(
                upper=tag.id,
                lower=lower.id if lower is not None else OUTLET,
                pieces=pieces,
                pumps=tuple(dict.fromkeys(pump for piece in pieces for pump in piece.pumps)),
                kept_bar=kept_bar,
                band_bar=math.hypot(max(_worth(one) for one in (tag, lower) if one is not None), KEPT * kept_bar),
                limits=tuple((one.id, limit) for one in upstream if (limit := trip_limit(rig, one.id)) is not None),
                columns=tuple(column.id for column in rig.columns if column.id in parts),
            )
        )
    return tuple(found)


def trunk_parts(rig: RigDefinition, path: FlowPath) -> tuple[str, ...]:
    """Lines and parts from the first merge to the outlet valve or vessel, that one left out."""
    leaving: Mapping[str, Line] = {line.start.part: line for line in rig.lines if not line.start.port}
    lines = {line.id: line for line in rig.lines}
    ends = {vessel.id for vessel in rig.vessels} | {path.outlet_valve}
    part = path.trunk[0].id if path.trunk else path.outlet_valve
    parts: list[str] = []
    while part and part not in ends and part not in parts:
        parts.append(part)
        line = lines.get(part) or leaving.get(part)
        part = "" if line is None else line.end.part if line.id == part else line.id
    return tuple(parts)


def trip_limit(rig: RigDefinition, tag: str) -> float | None:
    """The lowest limit above which an interlock trips on this tag."""
    limits = [
        cause.limit
        for lock in rig.interlocks
        for cause in lock.causes
        if cause.tag == tag and cause.kind is ConditionKind.HIGH
    ]
    return min(limits, default=None)


def _pressure_sensors(rig: RigDefinition, chain: tuple[str, ...]) -> list[tuple[int, Tag]]:
    found = []
    for tag in rig.tags:
        part, _, end = tag.at.partition(".")
        if tag.kind is TagKind.MEASURED and tag.measures == "pressure" and part in chain:
            found.append((chain.index(part) + (end == "outlet"), tag))
    return found


def _worth(tag: Tag) -> float:
    return max(RESOLUTION * (tag.high - tag.low), 3.0 * tag.wander)


def _piece(rig: RigDefinition, path: FlowPath, part: str, chain: tuple[str, ...]) -> Piece | None:
    pumps, columns = _pumps_at(path, part), {column.id: column for column in rig.columns}
    if part in columns:
        return Piece(part, bed(columns[part]), pumps, column_tags(rig, columns[part]), bed=True)
    line = next((line for line in rig.lines if line.id == part), None)
    if line is None:
        return None
    before = [columns[name] for name in chain[: chain.index(part)] if name in columns]
    warm = column_tags(rig, before[-1]) if before else ()
    return Piece(part, tube(line.bore_mm, line.length_mm), pumps, warm)


def _pumps_at(path: FlowPath, part: str) -> tuple[str, ...]:
    """The pumps whose liquid passes a part of the trunk; one without liquid of its own has those of the end."""
    for section in path.sections:
        if any(segment.id == part for segment in section.segments):
            return section.pumps
    return path.sections[-1].pumps


def tube(bore_mm: float, length_mm: float) -> float:
    """Resistance of a round tube [bar per mPa s and mL/min]: 128 mu L / (pi d^4)."""
    return 128.0 * 1e-3 * length_mm * 1e-3 * ML_MIN_M3_S / (math.pi * (bore_mm * 1e-3) ** 4) / 1e5


def bed(column: Column) -> float:
    """Resistance of a packed bed [bar per mPa s and mL/min]: K mu (1-e)^2 L / (e^3 d_p^2 A), K = 150 or 180."""
    packing = column.packing
    constant = 150.0 if packing.correlation == "ergun" else 180.0
    e, area = packing.voidage, math.pi / 4.0 * (column.bore_mm * 1e-3) ** 2
    beads = (packing.bead_diameter_mm * 1e-3) ** 2
    per_length = constant * 1e-3 * (1.0 - e) ** 2 / (e**3 * beads)
    return per_length * column.length_mm * 1e-3 * ML_MIN_M3_S / area / 1e5


def column_tags(rig: RigDefinition, column: Column) -> tuple[str, ...]:
    """Where the temperature of a column's liquid is read, best first: in the bed, at its jacket, in the bath."""
    measured = [
        tag for tag in rig.tags if tag.kind is TagKind.MEASURED and tag.measures == "temperature" and _in(tag, column)
    ]
    inside = [tag.id for tag in measured if not tag.at.endswith(".jacket")]
    jacket = [tag.id for tag in measured if tag.at.endswith(".jacket")]
    bath = [f"{column.jacket}.bath"] if column.jacket else []
    return (*inside, *jacket, *bath)


def _in(tag: Tag, column: Column) -> bool:
    return tag.at.partition(".")[0] == column.id
