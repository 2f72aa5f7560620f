"""Geometry of the flow path of any rig graph: feeds, merges, trunk, outlets and their hold-up volumes.

Pure geometry from the rig file. Volumes are those of the declared rig, liquid only [mL]. Of a column the accessible
liquid is e + (1 - e) b per volume of tube, with voidage e and liquid fraction b inside the beads (the tracer volume
of swollen gel beads; common practice, no source).
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from rigd.model.rig import Column, Line, RigDefinition, Valve


class FlowPathError(ValueError):
    """The lines do not make a path that can be run; the text says which part and what is missing."""


@dataclass(frozen=True, slots=True)
class Segment:
    """One stretch of liquid: line, tee, column, cell or syringe. Bore and length are 0 where they mean nothing."""

    id: str
    kind: str
    volume_mL: float
    bore_mm: float
    length_mm: float
    rating_bar: float


@dataclass(frozen=True, slots=True)
class SupplyLine:
    """The line from a vessel to a position of a feed valve (or straight to a pump: valve and position "")."""

    pump: str
    valve: str
    position: str
    vessel: str
    liquid: str
    segment: Segment

    @property
    def volume_mL(self) -> float:
        """Hold-up of the line."""
        return self.segment.volume_mL


@dataclass(frozen=True, slots=True)
class Feed:
    """One pump with what leads to it and from it to the part ``merge``, where it enters the trunk.

    ``supply`` maps the position of ``valve`` to the liquid drawn there; without a valve the only key is "".
    ``syringe`` is the dead volume that stays in one syringe at the end of its stroke. ``inlet_mL`` is the hold-up from
    the feed valve to the pump, ``outlet_mL`` from the pump to the merge, without the merge itself.
    """

    pump: str
    valve: str
    supply: Mapping[str, str]
    inlet: tuple[Segment, ...]
    outlet: tuple[Segment, ...]
    syringe: Segment
    merge: str
    inlet_mL: float = field(init=False)
    outlet_mL: float = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "inlet_mL", _total_mL(self.inlet))
        object.__setattr__(self, "outlet_mL", _total_mL(self.outlet))

    def position_of(self, liquid: str) -> str | None:
        """The valve position that draws this liquid, ``None`` when there is none."""
        return next((position for position, held in self.supply.items() if held == liquid), None)


@dataclass(frozen=True, slots=True)
class Section:
    """A stretch of the trunk with one flow: that of ``pumps``, all that have merged so far."""

    segments: tuple[Segment, ...]
    pumps: tuple[str, ...]
    volume_mL: float = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "volume_mL", _total_mL(self.segments))


@dataclass(frozen=True, slots=True)
class Outlet:
    """What lies behind a position of the outlet valve. ``vessel`` "" is a closed position."""

    position: str
    vessel: str
    segments: tuple[Segment, ...]

    @property
    def volume_mL(self) -> float:
        """Hold-up from the outlet valve to the vessel."""
        return _total_mL(self.segments)


@dataclass(frozen=True, slots=True)
class FlowPath:
    """The whole path. ``trunk`` runs from the first merge (included) to the outlet valve, columns and cells included.

    ``outlet_valve`` is "" when the trunk ends in a vessel without one. ``trunk`` holds the segments of all sections in
    the direction of flow, ``trunk_mL`` their hold-up.
    """

    feeds: tuple[Feed, ...]
    sections: tuple[Section, ...]
    outlet_valve: str
    outlets: Mapping[str, Outlet]
    supply_lines: tuple[SupplyLine, ...]
    column_mL: float
    interstitial_mL: float
    trunk: tuple[Segment, ...] = field(init=False)
    trunk_mL: float = field(init=False)

    def __post_init__(self) -> None:
        trunk = tuple(segment for section in self.sections for segment in section.segments)
        object.__setattr__(self, "trunk", trunk)
        object.__setattr__(self, "trunk_mL", _total_mL(trunk))

    @property
    def wetted_mL(self) -> float:
        """All liquid from the feed valves to the outlet valve, dead volumes of one syringe per pump included."""
        return self.trunk_mL + sum(feed.inlet_mL + feed.syringe.volume_mL + feed.outlet_mL for feed in self.feeds)

    def feed(self, pump: str) -> Feed:
        """The feed of a pump; ``KeyError`` if there is none."""
        for feed in self.feeds:
            if feed.pump == pump:
                return feed
        raise KeyError(pump)

    def to_part_mL(self, part: str, start: str = "") -> float:
        """Hold-up from the merge ``start`` ("" = the first) to the inlet of ``part``; the outlet valve is a part.

        Raises ``KeyError`` for a part that is not on the trunk. Negative when ``part`` lies before ``start``.
        """
        return self._inlet_mL(part) - (self._inlet_mL(start) if start else 0.0)

    def past_part_mL(self, part: str) -> float:
        """Hold-up from the first merge to the outlet of ``part``."""
        own = next((segment.volume_mL for segment in self.trunk if segment.id == part), 0.0)
        return self._inlet_mL(part) + own

    def _inlet_mL(self, part: str) -> float:
        if part == self.outlet_valve:
            return self.trunk_mL
        before = 0.0
        for segment in self.trunk:
            if segment.id == part:
                return before
            before += segment.volume_mL
        raise KeyError(part)

    def residence_s(self, flows_mL_min: Mapping[str, float]) -> float:
        """Sum of the residence times of the trunk's sections; infinite while a section has no flow."""
        total_s = 0.0
        for section in self.sections:
            flow = sum(flows_mL_min.get(pump, 0.0) for pump in section.pumps)
            if section.volume_mL > 0:
                total_s += 60.0 * section.volume_mL / flow if flow > 0 else math.inf
        return total_s


def flow_path(rig: RigDefinition) -> FlowPath:
    """Trace the lines of a rig. Raises ``FlowPathError`` when a pump has no source or leads nowhere."""
    graph = _Graph(rig)
    chains = {pump.id: graph.chain(pump.id) for pump in rig.pumps}
    if not chains:
        raise FlowPathError("the rig has no pump")
    trunk = _trunk_parts(chains)
    merges = {pump: next((part for part in chain if part in trunk), "") for pump, chain in chains.items()}
    lost = [pump for pump, merge in merges.items() if not merge]
    if lost:
        raise FlowPathError(f"pump {lost[0]} never joins the path of the other pumps")
    feeds = tuple(graph.feed(pump.id, chains[pump.id], merges[pump.id]) for pump in rig.pumps)
    outlet_valve = trunk[-1] if graph.is_valve(trunk[-1]) else ""
    columns = [column for column in rig.columns if column.id in trunk]
    return FlowPath(
        feeds=feeds,
        sections=_sections(graph, trunk, merges),
        outlet_valve=outlet_valve,
        outlets=graph.outlets(outlet_valve),
        supply_lines=tuple(line for feed in feeds for line in graph.supply_lines(feed.pump, feed.valve)),
        column_mL=sum(column_liquid_mL(column) for column in columns),
        interstitial_mL=sum(tube_mL(column.bore_mm, column.length_mm) * column.packing.voidage for column in columns),
    )


def tube_mL(bore_mm: float, length_mm: float) -> float:
    """Volume of a round tube [mL]."""
    return math.pi / 4 * bore_mm**2 * length_mm / 1000.0


def column_liquid_mL(column: Column) -> float:
    """Liquid between and inside the beads of a column [mL]."""
    packing = column.packing
    wet = packing.voidage + (1.0 - packing.voidage) * packing.bead_liquid_fraction
    return tube_mL(column.bore_mm, column.length_mm) * wet


def _total_mL(segments: Iterable[Segment]) -> float:
    return sum(segment.volume_mL for segment in segments)


def _trunk_parts(chains: Mapping[str, tuple[str, ...]]) -> tuple[str, ...]:
    """Parts and lines from the first merge on; for a single pump, from the first part after its line."""
    if len(chains) == 1:
        (only,) = chains.values()
        return only[1:] if len(only) > 1 else only
    tails = [_shared_tail(pump, chains) for pump in chains]
    return max(tails, key=len)


def _shared_tail(pump: str, chains: Mapping[str, tuple[str, ...]]) -> tuple[str, ...]:
    others = {part for other, chain in chains.items() if other != pump for part in chain}
    chain = chains[pump]
    return next((chain[i:] for i, part in enumerate(chain) if part in others), ())


def _sections(graph: _Graph, trunk: tuple[str, ...], merges: Mapping[str, str]) -> tuple[Section, ...]:
    """Cut the trunk wherever another pump joins."""
    starts = [i for i, part in enumerate(trunk) if part in merges.values()]
    sections = []
    for start, end in zip(starts, [*starts[1:], len(trunk)], strict=True):
        joined = tuple(pump for pump, merge in merges.items() if trunk.index(merge) <= start)
        sections.append(Section(graph.segments(trunk[start:end]), joined))
    return tuple(sections)


class _Graph:
    """Look-ups over the lines of a rig."""

    def __init__(self, rig: RigDefinition) -> None:
        self._valves: dict[str, Valve] = {valve.id: valve for valve in rig.valves}
        self._vessels = {vessel.id: vessel for vessel in rig.vessels}
        self._pumps = {pump.id: pump for pump in rig.pumps}
        self._lines = rig.lines
        self._segments = _all_segments(rig)

    def is_valve(self, part: str) -> bool:
        return part in self._valves

    def segments(self, parts: Iterable[str]) -> tuple[Segment, ...]:
        return tuple(self._segments[part] for part in parts if part in self._segments)

    def _from(self, part: str) -> Line | None:
        leaving = [line for line in self._lines if line.start.part == part]
        if len(leaving) > 1:
            raise FlowPathError(f"{part} has {len(leaving)} lines leaving it; only an outlet valve may branch")
        return leaving[0] if leaving else None

    def _into(self, part: str, port: str = "") -> Line | None:
        return next((line for line in self._lines if line.end.part == part and line.end.port == port), None)

    def chain(self, pump: str) -> tuple[str, ...]:
        """Lines and parts downstream of a pump, up to and with the outlet valve or vessel."""
        chain: list[str] = []
        part = pump
        while part not in self._vessels and (part == pump or part not in self._valves):
            line = self._from(part)
            if line is None:
                raise FlowPathError(f"no line leaves {part}; the path of pump {pump} ends there")
            if line.end.part in chain:
                raise FlowPathError(f"the lines of pump {pump} run in a circle at {line.end.part}")
            chain += [line.id, line.end.part]
            part = line.end.part
        return tuple(chain)

    def feed(self, pump: str, chain: tuple[str, ...], merge: str) -> Feed:
        inlet = self._into(pump)
        if inlet is None:
            raise FlowPathError(f"no line leads to pump {pump}")
        valve = inlet.start.part if inlet.start.part in self._valves else ""
        supply = {line.position: line.liquid for line in self.supply_lines(pump, valve)}
        if not supply:
            raise FlowPathError(f"pump {pump} has no source: nothing with a liquid leads to {valve or pump}")
        return Feed(
            pump=pump,
            valve=valve,
            supply=supply,
            inlet=(self._segments[inlet.id],) if valve else (),
            outlet=self.segments(chain[: chain.index(merge)]),
            syringe=Segment(pump, "syringe", self._pumps[pump].dead_mL, self._pumps[pump].bore_mm, 0.0, 0.0),
            merge=merge,
        )

    def supply_lines(self, pump: str, valve: str) -> tuple[SupplyLine, ...]:
        """Lines from vessels with a liquid to the valve's positions, in their order; to the pump without a valve."""
        places = [(valve, position) for position in self._valves[valve].positions] if valve else [(pump, "")]
        found = []
        for part, port in places:
            line = self._into(part, port)
            vessel = self._vessels.get(line.start.part) if line else None
            if line and vessel and vessel.liquid:
                found.append(SupplyLine(pump, valve, port, vessel.id, vessel.liquid, self._segments[line.id]))
        return tuple(found)

    def outlets(self, valve: str) -> dict[str, Outlet]:
        """What lies behind each position of the outlet valve."""
        if not valve:
            return {}
        leaving = {line.start.port: line for line in self._lines if line.start.part == valve}
        found = {}
        for position in self._valves[valve].positions:
            line = leaving.get(position)
            segments = (self._segments[line.id],) if line else ()
            found[position] = Outlet(position, line.end.part if line else "", segments)
        return found


def _all_segments(rig: RigDefinition) -> dict[str, Segment]:
    """Every part that holds liquid, by id."""
    lines = [
        Segment(line.id, "line", tube_mL(line.bore_mm, line.length_mm), line.bore_mm, line.length_mm, line.rating_bar)
        for line in rig.lines
    ]
    tees = [Segment(tee.id, "tee", tee.volume_mL, 0.0, 0.0, tee.rating_bar) for tee in rig.tees]
    cells = [Segment(cell.id, "cell", cell.volume_mL, 0.0, 0.0, cell.rating_bar) for cell in rig.cells]
    columns = [
        Segment(col.id, "column", column_liquid_mL(col), col.bore_mm, col.length_mm, col.rating_bar)
        for col in rig.columns
    ]
    return {segment.id: segment for segment in (*lines, *tees, *cells, *columns)}
