"""What a fault may hit in a rig, and which edges and nodes of the network that means."""

from __future__ import annotations

from collections.abc import Sequence

from rigd.model.rig import RigDefinition, TagKind, VesselRole
from rigd_sim.plant.layout import Layout


def lines(rig: RigDefinition) -> Sequence[str]:
    """All lines."""
    return [line.id for line in rig.lines]


def passages(rig: RigDefinition) -> Sequence[str]:
    """Everything that liquid passes and that can clog: lines, columns, regulators, valves, tees, cells."""
    parts = (rig.columns, rig.regulators, rig.valves, rig.tees, rig.cells)
    return [*lines(rig), *(part.id for group in parts for part in group)]


def wetted(rig: RigDefinition) -> Sequence[str]:
    """Everything that can leak."""
    return [*passages(rig), *pumps(rig)]


def pumps(rig: RigDefinition) -> Sequence[str]:
    """All pumps."""
    return [pump.id for pump in rig.pumps]


def valves(rig: RigDefinition) -> Sequence[str]:
    """All valves with a drive."""
    return [valve.id for valve in rig.valves if valve.device]


def columns(rig: RigDefinition) -> Sequence[str]:
    """All columns."""
    return [column.id for column in rig.columns]


def chillers(rig: RigDefinition) -> Sequence[str]:
    """All chillers."""
    return [chiller.id for chiller in rig.chillers]


def cells(rig: RigDefinition) -> Sequence[str]:
    """All IR cells."""
    return [cell.id for cell in rig.cells]


def units(rig: RigDefinition) -> Sequence[str]:
    """Everything that can be told something."""
    return [*pumps(rig), *valves(rig), *chillers(rig)]


def vessels(rig: RigDefinition) -> Sequence[str]:
    """All vessels."""
    return [vessel.id for vessel in rig.vessels]


def supplies(rig: RigDefinition) -> Sequence[str]:
    """All bottles."""
    return [v.id for v in rig.vessels if v.role is VesselRole.SUPPLY]


def receivers(rig: RigDefinition) -> Sequence[str]:
    """Flasks and waste."""
    return [v.id for v in rig.vessels if v.role is not VesselRole.SUPPLY]


def sensors(rig: RigDefinition) -> Sequence[str]:
    """All measured tags that a converter reads."""
    units = {d.id: d.unit for d in rig.devices}
    return [t.id for t in rig.tags if t.kind is TagKind.MEASURED and t.device and not units.get(t.device)]


def temperatures(rig: RigDefinition) -> Sequence[str]:
    """All temperature sensors."""
    return [tag for tag in sensors(rig) if rig.tag(tag).measures == "temperature"]


def devices(rig: RigDefinition) -> Sequence[str]:
    """All devices."""
    return [device.id for device in rig.devices]


def edges_through(layout: Layout, part: str) -> list[int]:
    """Edges that a block of this part shuts: the edge itself, or all lines that leave it (that enter a valve port)."""
    if part in layout.edge_index:
        return [layout.edge_index[part]]
    nodes = set(layout.nodes_of(part))
    leaving = [e for e, edge in enumerate(layout.edges[: layout.passive]) if edge.a in nodes and edge.kind == "line"]
    return leaving or [
        e for e, edge in enumerate(layout.edges[: layout.passive]) if edge.b in nodes and edge.kind == "line"
    ]


def leak_node(layout: Layout, part: str) -> int:
    """Node where a leak of this part is: the downstream end of a line, the outlet of a pump, else its inlet."""
    node = layout.point(part)
    if node in layout.leak_edge:
        return node
    return layout.edges[layout.edge_index[part]].a
