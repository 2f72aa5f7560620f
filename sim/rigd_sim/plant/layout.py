"""From a rig file's parts to nodes and edges with numbers, once, when the plant is made."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TypeVar

from rigd.model.rig import Column, End, Line, LiquidRole, Pump, Relief, RigDefinition, Vessel, VesselRole
from rigd_sim.physics.constants import ATMOSPHERE_PA, BAR_PA, ML_M3, ML_MIN_M3_S, ZERO_CELSIUS_K
from rigd_sim.physics.properties import solvents_of
from rigd_sim.physics.tubing import RINGS, area

LIQUID_COMPRESSIBILITY_PER_PA = 1e-9
"""About 1e-4 per bar with the tube wall: common practice for organic liquids, no source."""
CELLS_TARGET = 220
CELLS_LINE_MIN, CELLS_LINE_MAX, CELLS_SUPPLY_MAX = 6, 110, 16
CELLS_BED = 100
BARREL_NODE_M3 = 20e-9
JOINT_NODE_M3 = 1e-10
CAVITATION_PA = 0.9e5
REGULATOR_CONDUCTANCE = 1e-6 / 60 / 0.05e5  # 1 mL/min at 50 mbar above the set pressure: common practice, no source

RESEAT_SHARE = 0.01
"""A relief valve closes when this part of its capacity still passes: it would never do so otherwise."""
EXPANSION_K = 150.0
"""A bed's reserve of liquid for thermal expansion is enough for this rise of temperature."""

P = TypeVar("P", Pump, Column, Vessel, Relief)


def with_truth(part: P, truth: Mapping[str, float], nested: str = "") -> P:
    """A part with the true values of the rig file's ``simulation.truth`` in place of the declared ones."""
    prefix = f"{part.id}."
    own = {k[len(prefix) :]: v for k, v in truth.items() if k.startswith(prefix)}
    known = {k: v for k, v in own.items() if k in part.__dataclass_fields__}
    if isinstance(part, Column):
        inner = {k: v for k, v in own.items() if k in part.packing.__dataclass_fields__}
        return replace(part, packing=replace(part.packing, **inner), **known)  # type: ignore[arg-type]
    return replace(part, **known)  # type: ignore[arg-type]


@dataclass(slots=True)
class Node:
    """A point with one pressure and one composition. ``volume`` [m3] is stirred; ``compliance`` [m3/Pa]."""

    id: str
    part: str
    volume: float
    compliance: float
    ground: bool = False  # pressure is given (vessels, room)
    hydraulic: bool = True  # False: liquid only (syringes)
    endless: bool = False


@dataclass(slots=True)
class Edge:
    """A way from node ``a`` to node ``b``. ``cells`` = 0 passes liquid on at once. ``crack`` < 0: no valve."""

    id: str
    a: int
    b: int
    kind: str  # line, column, regulator, vapour, leak, syringe
    volume: float = 0.0
    cells: int = 0
    diameter: float = 0.0
    length: float = 0.0
    crack: float = -1.0
    shut: float = -1.0  # where a relief valve closes again; ``crack`` for all others
    bias: float = 0.0  # pressure that a relief valve's spring takes from what drives the flow
    conductance: float = 0.0
    gates: tuple[tuple[str, str], ...] = ()  # (valve, position) that must all be open
    supply: bool = False
    rings: int = 1


@dataclass(slots=True)
class SyringeEdges:
    """Where one syringe of a pump stands in the network."""

    node: int
    deliver: int
    draw: int


@dataclass(slots=True)
class Layout:
    """All nodes and edges; hydraulic edges come first (``passive`` of them), then syringe and leak edges."""

    nodes: list[Node] = field(default_factory=list)
    edges: list[Edge] = field(default_factory=list)
    passive: int = 0
    node_index: dict[str, int] = field(default_factory=dict)
    edge_index: dict[str, int] = field(default_factory=dict)
    syringes: dict[str, list[SyringeEdges]] = field(default_factory=dict)
    leak_edge: dict[int, int] = field(default_factory=dict)
    air_edge: dict[int, int] = field(default_factory=dict)
    expansion: dict[str, tuple[int, float]] = field(default_factory=dict)  # column -> edge, m3 per K
    pumps: dict[str, Pump] = field(default_factory=dict)
    columns: dict[str, Column] = field(default_factory=dict)
    vessels: dict[str, Vessel] = field(default_factory=dict)

    def add_node(self, node: Node) -> int:
        """Append a node; its index."""
        self.node_index[node.id] = len(self.nodes)
        self.nodes.append(node)
        return self.node_index[node.id]

    def add_edge(self, edge: Edge) -> int:
        """Append an edge; its index."""
        self.edge_index[edge.id] = len(self.edges)
        self.edges.append(edge)
        return self.edge_index[edge.id]

    def nodes_of(self, part: str) -> list[int]:
        """Nodes of a part (inlet before outlet)."""
        return [i for i, node in enumerate(self.nodes) if node.part == part and node.hydraulic]

    def point(self, at: str) -> int:
        """Node where "TEE", "COL", "COL.inlet", "COL.outlet", "PU-A", ... is; ``KeyError`` if there is none."""
        part, _, place = at.partition(".")
        if at in self.node_index:
            return self.node_index[at]
        for suffix in {"outlet": (".out",), "inlet": (".in",)}.get(place, (".in", ".out")):
            if part + suffix in self.node_index:
                return self.node_index[self._barrel(part, suffix)]
        if part in self.edge_index:
            return self.edges[self.edge_index[part]].b
        return self.node_index[part]

    def _barrel(self, part: str, suffix: str) -> str:
        """A pump is measured at its outlet."""
        return part + (".out" if part in self.pumps else suffix)


def build_layout(rig: RigDefinition) -> Layout:
    """The network of a rig. Vessels are vented (pressure 0) unless declared otherwise."""
    layout = Layout()
    truth = rig.simulation.truth
    layout.pumps = {p.id: with_truth(p, truth) for p in rig.pumps}
    layout.columns = {c.id: with_truth(c, truth) for c in rig.columns}
    layout.vessels = {v.id: with_truth(v, truth) for v in rig.vessels}
    _add_nodes(layout, rig)
    cell = _cell_volume(layout, rig)
    for line in rig.lines:
        layout.add_edge(_line_edge(layout, line, cell))
    for column in layout.columns.values():
        layout.add_edge(_column_edge(layout, column))
    for regulator in rig.regulators:
        layout.add_edge(
            Edge(regulator.id, layout.node_index[f"{regulator.id}.in"], layout.node_index[f"{regulator.id}.out"],
                 "regulator", crack=regulator.set_bar * BAR_PA, conductance=REGULATOR_CONDUCTANCE)
        )  # fmt: skip
    for pump in layout.pumps.values():
        layout.add_edge(
            Edge(f"{pump.id}.vapour", layout.node_index["air"], layout.node_index[f"{pump.id}.in"], "vapour",
                 crack=CAVITATION_PA, conductance=1e-8 / 1e3)
        )  # fmt: skip
    _add_reliefs(layout, rig)
    _add_leaks(layout)
    _add_shunts(layout)
    layout.passive = len(layout.edges)
    for pump in layout.pumps.values():
        _add_syringes(layout, pump)
    _add_air_inlets(layout)
    _add_expansion(layout, rig)
    _share_compliance(layout)
    return layout


def _add_nodes(layout: Layout, rig: RigDefinition) -> None:
    for vessel in layout.vessels.values():
        layout.add_node(Node(vessel.id, vessel.id, vessel.content_mL * ML_M3, 1e-6, ground=vessel.vented))
    layout.add_node(Node("floor", "floor", 0.0, 1e-6, ground=True))
    layout.add_node(Node("air", "air", 1.0, 1e-6, ground=True, endless=True))
    for valve in rig.valves:
        layout.add_node(Node(valve.id, valve.id, JOINT_NODE_M3, 0.0))
    for pump in layout.pumps.values():
        layout.add_node(Node(f"{pump.id}.in", pump.id, JOINT_NODE_M3, 1e-15))
        compliance = pump.compliance_mL_bar * ML_M3 / BAR_PA
        layout.add_node(Node(f"{pump.id}.out", pump.id, BARREL_NODE_M3, compliance))
    for tee in rig.tees:
        layout.add_node(Node(tee.id, tee.id, tee.volume_mL * ML_M3, 0.0))
    for cell in rig.cells:
        layout.add_node(Node(cell.id, cell.id, cell.volume_mL * ML_M3, 0.0))
    for part in (*layout.columns, *(r.id for r in rig.regulators)):
        layout.add_node(Node(f"{part}.in", part, JOINT_NODE_M3, 0.0))
        layout.add_node(Node(f"{part}.out", part, JOINT_NODE_M3, 0.0))


def _line_volume(line: Line) -> float:
    return area(line.bore_mm * 1e-3) * line.length_mm * 1e-3


def _is_supply(layout: Layout, line: Line) -> bool:
    start = layout.vessels.get(line.start.part)
    return (start is not None and start.role is VesselRole.SUPPLY) or line.end.part in layout.pumps


def _cell_volume(layout: Layout, rig: RigDefinition) -> float:
    total = sum(_line_volume(line) for line in rig.lines if not _is_supply(layout, line))
    return max(total, 1e-9) / CELLS_TARGET * 2.0


def _end_node(layout: Layout, end: End, entering: bool) -> int:
    for name in (end.part, f"{end.part}.{'in' if entering else 'out'}"):
        if name in layout.node_index:
            return layout.node_index[name]
    raise KeyError(end.part)


def _line_edge(layout: Layout, line: Line, cell: float) -> Edge:
    volume = _line_volume(line)
    supply = _is_supply(layout, line)
    most = CELLS_SUPPLY_MAX if supply else CELLS_LINE_MAX
    cells = min(max(round(volume / cell), CELLS_LINE_MIN), most)
    gates = tuple((end.part, end.port) for end in (line.start, line.end) if end.port)
    return Edge(
        line.id, _end_node(layout, line.start, False), _end_node(layout, line.end, True), "line", volume, cells,
        line.bore_mm * 1e-3, line.length_mm * 1e-3, gates=gates, supply=supply,
        rings=1 if supply else RINGS,
    )  # fmt: skip


def _column_edge(layout: Layout, column: Column) -> Edge:
    bore, length = column.bore_mm * 1e-3, column.length_mm * 1e-3
    volume = area(bore) * length * column.packing.voidage
    ends = layout.node_index[f"{column.id}.in"], layout.node_index[f"{column.id}.out"]
    return Edge(column.id, *ends, "column", volume, CELLS_BED, bore, length)


def _add_reliefs(layout: Layout, rig: RigDefinition) -> None:
    """A way from the part that a relief valve stands at into its vessel, or to the floor."""
    for declared in rig.reliefs:
        relief = with_truth(declared, rig.simulation.truth)
        out = layout.node_index[relief.to or "floor"]
        opens, reseats = relief.set_bar * BAR_PA, relief.reseat_bar * BAR_PA
        shuts = reseats + RESEAT_SHARE * (opens - reseats)
        conductance = relief.capacity_mL_min * ML_MIN_M3_S / (opens - reseats)
        layout.add_edge(
            Edge(relief.id, layout.point(relief.at), out, "relief", crack=opens, shut=shuts, bias=reseats,
                 conductance=conductance)
        )  # fmt: skip


def _add_expansion(layout: Layout, rig: RigDefinition) -> None:
    """What a bed's liquid gives off when it warms and takes back when it cools: a reserve that only heat moves."""
    solvent = solvents_of(rig)[next(q.properties for q in rig.liquids if q.role is LiquidRole.SOLVENT)]
    per_K = solvent.expansion(rig.simulation.ambient_degC + ZERO_CELSIUS_K)
    for column in layout.columns.values():
        liquid = column_liquid(column)
        name = f"{column.id}.expansion"
        node = layout.add_node(Node(name, column.id, liquid * per_K * EXPANSION_K, 0.0, hydraulic=False))
        out = layout.node_index[f"{column.id}.out"]
        layout.expansion[column.id] = (layout.add_edge(Edge(name, node, out, "expansion")), liquid * per_K)


def column_liquid(column: Column) -> float:
    """Liquid between and inside the beads of a column [m3]."""
    packing = column.packing
    share = packing.voidage + (1.0 - packing.voidage) * packing.bead_liquid_fraction
    return area(column.bore_mm * 1e-3) * column.length_mm * 1e-3 * share


def _add_leaks(layout: Layout) -> None:
    """A closed way from every wetted node to the floor, opened by a leak or burst."""
    floor = layout.node_index["floor"]
    for i, node in enumerate(list(layout.nodes)):
        if not node.ground and node.hydraulic:
            layout.leak_edge[i] = layout.add_edge(Edge(f"{node.id}.leak", i, floor, "leak"))


def _add_shunts(layout: Layout) -> None:
    """Closed ways that faults open: past the beads of a column, and back through a pump's outlet check valve."""
    for column in layout.columns:
        ends = layout.node_index[f"{column}.in"], layout.node_index[f"{column}.out"]
        layout.add_edge(Edge(f"{column}.bypass", *ends, "shunt"))
    for pump in layout.pumps:
        ends = layout.node_index[f"{pump}.out"], layout.node_index[f"{pump}.in"]
        layout.add_edge(Edge(f"{pump}.back", *ends, "shunt"))


def _add_air_inlets(layout: Layout) -> None:
    """A way for gas into every wetted node, used by bubbles."""
    air = layout.node_index["air"]
    for i in layout.leak_edge:
        layout.air_edge[i] = layout.add_edge(Edge(f"{layout.nodes[i].id}.air", air, i, "air"))


def _add_syringes(layout: Layout, pump: Pump) -> None:
    inlet, outlet = layout.node_index[f"{pump.id}.in"], layout.node_index[f"{pump.id}.out"]
    layout.syringes[pump.id] = []
    for number in range(pump.syringes):
        name = f"{pump.id}.syringe{number + 1}"
        node = layout.add_node(Node(name, pump.id, pump.dead_mL * ML_M3, 0.0, hydraulic=False))
        deliver = layout.add_edge(Edge(f"{name}.deliver", node, outlet, "syringe"))
        draw = layout.add_edge(Edge(f"{name}.draw", inlet, node, "syringe"))
        layout.syringes[pump.id].append(SyringeEdges(node, deliver, draw))


def _share_compliance(layout: Layout) -> None:
    """Give every node the compressibility of its own liquid and of half of each edge that ends there."""
    for node in layout.nodes:
        if not node.ground and node.hydraulic:
            node.compliance += node.volume * LIQUID_COMPRESSIBILITY_PER_PA
    for edge in layout.edges:
        for end in (edge.a, edge.b):
            layout.nodes[end].compliance += 0.5 * edge.volume * LIQUID_COMPRESSIBILITY_PER_PA
    for node in layout.nodes:
        if not node.ground and node.hydraulic and node.id not in layout.vessels:
            node.compliance = max(node.compliance, 1e-18)
            node.volume += node.compliance * ATMOSPHERE_PA  # what compression holds at atmospheric pressure
