"""Pressures and flows of the rig: conductances from geometry, liquid and valves, then the network solver."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rigd_sim.physics.constants import ATMOSPHERE_PA, BAR_PA
from rigd_sim.physics.gas import fit_gas
from rigd_sim.physics.gel_bed import relax, settled
from rigd_sim.physics.network import EDGE_ROWS, LAG, LINK_ROWS, NODE_ROWS, PEAK, SENSOR_ROWS, SHOWN, advance_pressures
from rigd_sim.physics.packed_bed import gradient, pressed_voidage
from rigd_sim.physics.properties import mixture_viscosity
from rigd_sim.physics.tubing import resistance
from rigd_sim.plant.contents import Contents
from rigd_sim.plant.layout import Layout
from rigd_sim.plant.levers import Levers
from rigd_sim.plant.packing import Bed

SMALLEST_VELOCITY = 1e-9
AT_ONCE, MOST_STEPS = 0.1, 500
"""Gas that wants more volume in a step than moves the pressure by this part of itself is followed in smaller ones."""
LINE_STEP_K = 0.5
"""The viscosity in a line is found anew when its liquid is warmer or colder by this (about 1 %)."""


@dataclass(slots=True)
class GelState:
    """Swelling of one bed: ratio now, settled dry volume [m3], solvent ratio that the packing was declared in."""

    ratio: float
    dry_volume: float
    passed: float = 0.0
    highest: float = 0.0
    seen: tuple[float, float, float, float] = (0.0, 0.0, 0.0, 0.0)


@dataclass(slots=True)
class Expansion:
    """Liquid that heat drives out of one bed: edge of its reserve, node that gets it, m3/K, what is still to flow."""

    edge: int
    node: int
    bed: int
    per_K: float
    seen_K: float
    left: float = 0.0
    rate: float = 0.0


class Flows:
    """Hydraulic arrays and their step. Edge volumes go to ``contents.pending``."""

    def __init__(self, layout: Layout, contents: Contents, truth: dict[str, float]) -> None:
        self.layout, self.contents = layout, contents
        self.hydraulic = [i for i, n in enumerate(layout.nodes) if n.hydraulic]
        self.rank = {i: r for r, i in enumerate(self.hydraulic)}
        self._make_nodes(layout)
        self._make_edges(layout)
        self.watch([], [])
        self.gels = {b.column.id: self._gel(b, truth) for b in contents.beds.values()}
        self.update_liquid()

    def _make_nodes(self, layout: Layout) -> None:
        """Table of the network solver; the attributes are views into it."""
        size = len(self.hydraulic)
        self.node = np.zeros((NODE_ROWS, size))
        self.pressure, self.compliance, self.source, self.peak = self.node[: PEAK + 1]
        self.rest_compliance = np.array([layout.nodes[i].compliance for i in self.hydraulic])
        self.compliance[:] = self.rest_compliance
        self.ground = np.array([layout.nodes[i].ground for i in self.hydraulic], dtype=np.int64)
        self._matrix = np.zeros((size, size))

    def _make_edges(self, layout: Layout) -> None:
        edges = layout.edges[: layout.passive]
        self.link = np.zeros((LINK_ROWS, len(edges)), dtype=np.int64)
        self.edge = np.zeros((EDGE_ROWS, len(edges)))
        self.ea, self.eb = self.link[:2]
        self.conductance, self.crack, self.shut, self.bias, self.volume = self.edge
        self.ea[:], self.eb[:] = [self.rank[e.a] for e in edges], [self.rank[e.b] for e in edges]
        self.crack[:] = [e.crack for e in edges]
        self.shut[:] = [e.crack if e.shut < 0.0 else e.shut for e in edges]
        self.bias[:] = [e.crack if e.shut < 0.0 else e.bias for e in edges]
        self.base = np.array([e.conductance for e in edges])
        self.gate = np.ones(len(edges))
        self.flow = np.zeros(len(layout.edges))
        self.step = 0.05
        self._lines = [e for e, edge in enumerate(edges) if edge.kind == "line"]
        self._stale = True
        self.restless = 0.0
        self._bleed = np.zeros(len(self.hydraulic))
        self._bleed_s = 0.0
        self.barrel: list[tuple[int, int]] = []  # syringes at work and the nodes at their pumps' outlets
        self._unmet, self._own = np.zeros(len(layout.nodes)), np.zeros(len(layout.nodes))
        self._closed = np.array([n.ground or n.id in layout.vessels for n in layout.nodes])[self.hydraulic]
        self._rest_volume = np.array([layout.nodes[i].volume for i in self.hydraulic])
        self.expansion = [
            Expansion(edge, self.rank[layout.edges[edge].b], layout.edge_index[name], per_K, self.contents.room_K)
            for name, (edge, per_K) in layout.expansion.items()
        ]

    def _gel(self, bed: Bed, truth: dict[str, float]) -> GelState:
        """Packed swollen (default) or dry (``truth`` "COL.packed_dry" = 1), with ``COL.headspace`` of free volume."""
        room = 1.0 - truth.get(f"{bed.column.id}.headspace", 0.0)
        full = bed.column.packing.swelling
        dry = bed.empty_volume * room
        return GelState(1.0, dry if truth.get(f"{bed.column.id}.packed_dry", 0.0) else dry / full)

    def watch(self, nodes: list[int], lags_s: list[float]) -> None:
        """Let the solver follow these nodes (layout indices) as lagged pressure sensors."""
        self.sensor_node = np.array([self.rank[i] for i in nodes], dtype=np.int64)
        self.sensor = np.zeros((SENSOR_ROWS, len(nodes)))
        self.sensor[LAG] = lags_s

    def shown_bar(self, slot: int) -> float:
        """Lagged pressure of a watched node [bar]."""
        return float(self.sensor[SHOWN, slot]) / BAR_PA

    def update_liquid(self) -> None:
        """Conductances of lines and beds from the liquid in them; call after each transport step."""
        contents = self.contents
        many = len(contents.solvents) > 1
        if many or contents.warmed_K > LINE_STEP_K:
            now_K = contents.line_K
            for e in self._lines:
                if many or abs(now_K[e] - contents.line_seen_K[e]) > LINE_STEP_K:
                    edge = self.layout.edges[e]
                    mu = self._viscosity(e, float(now_K[e]))
                    self.base[e] = 1.0 / resistance(mu, edge.length, edge.diameter)
                    contents.line_seen_K[e] = now_K[e]
            self._stale = True
        for bed in contents.beds.values():
            self._update_bed(bed, many)

    def _viscosity(self, e: int, t_K: float) -> float:
        contents = self.contents
        if len(contents.solvents) == 1:
            return contents.fluid().viscosity(t_K)
        mean = contents.cells[contents.slots(e)].mean(axis=0)
        return mixture_viscosity(contents.solvent_of(mean) or {contents.solvents[0]: 1.0}, t_K, contents.sets)

    def _update_bed(self, bed: Bed, many: bool) -> None:
        """Recompute a bed's conductance when what it depends on has changed by more than a thousandth."""
        e = bed.edge
        t_mean = self.contents.line_K.item(e)
        drop = 0.0
        if self.conductance.item(e):
            drop = self.pressure.item(self.ea.item(e)) - self.pressure.item(self.eb.item(e))
        gel = self.gels[bed.column.id]
        flow = self.flow.item(e)
        state = (t_mean, gel.ratio, flow, drop)
        old = gel.seen
        same = abs(t_mean - old[0]) <= 0.03 and abs(gel.ratio - old[1]) <= 1e-3 and abs(flow - old[2]) <= 1e-11
        if same and not many and abs(drop - old[3]) <= 100.0:
            return
        gel.seen = state
        self._stale = True
        packing = bed.column.packing
        mu, rho = self._viscosity(e, t_mean), self.contents.fluid().density(t_mean)
        shape = settled(
            gel.ratio, packing.swelling, gel.dry_volume, bed.empty_volume, bed.length, packing.voidage,
            packing.bead_diameter_mm * 1e-3,
        )  # fmt: skip
        gel.highest = max(gel.highest, abs(drop))
        bed.voidage = pressed_voidage(
            shape.voidage, packing.compressibility_per_bar / BAR_PA, abs(drop), gel.highest, packing.hysteresis
        )
        velocity = max(abs(float(self.flow[e])) / bed.section, SMALLEST_VELOCITY)
        per_length = gradient(packing.correlation, mu, rho, velocity, shape.bead_diameter, bed.voidage)
        self.base[e] = velocity * bed.section / (per_length * shape.length)

    def swell(self, dt: float) -> None:
        """Swelling goes on where liquid has reached the bed, towards the ratio of the solvent in it."""
        contents = self.contents
        for bed in contents.beds.values():
            gel, packing = self.gels[bed.column.id], bed.column.packing
            gel.passed += abs(float(self.flow[bed.edge])) * dt
            if gel.passed < 0.5 * self.layout.edges[bed.edge].volume:
                continue
            target = packing.swelling
            if len(contents.solvents) > 1:
                inside = contents.solvent_of(contents.beads[bed.start : bed.start + bed.cells].mean(axis=0))
                total = sum(inside.values()) or 1.0
                reference = contents.fluid().swelling_mL_g
                target *= sum(f * contents.sets[s].swelling_mL_g for s, f in inside.items()) / total / reference
            gel.ratio = relax(gel.ratio, max(target, 1.0), dt, packing.swell_s)

    def expand(self, dt: float) -> None:
        """Give the liquid that heat has driven out of the beds since the last step an even flow over about ``dt``.

        Blocked in, it raises the pressure by beta V dT / C; on cooling the bed takes it back.
        """
        for swell in self.expansion:
            warm = self.contents.line_K.item(swell.bed)
            swell.left += swell.per_K * (warm - swell.seen_K)
            swell.seen_K = warm
            swell.rate = swell.left / dt

    def fit_gas(self, dt: float) -> None:
        """Let gas give way to the pressure where it is.

        What a node then has too much, or lacks, flows away or in during the next ``dt``: gas that comes to a lower
        pressure drives liquid on, gas that is pressed draws it in.
        """
        contents = self.contents
        absolute = np.maximum(self.pressure, 0.0) + ATMOSPHERE_PA
        contents.squeeze[self.hydraulic] = np.where(self._closed, 1.0, ATMOSPHERE_PA / absolute)
        pairs = np.array(self.barrel, dtype=np.int64).reshape(-1, 2).T.copy()
        own = self._rest_volume + self.rest_compliance * self.pressure
        self._own[self.hydraulic] = own
        fit_gas(
            contents.link, contents.edge, contents.cells, contents.node, contents.node_c, contents.mark,
            contents.n_species, contents.squeeze, pairs, self._own, self._unmet,
        )  # fmt: skip
        excess = contents.node_volume[self.hydraulic] - own - self._unmet[self.hydraulic]
        self._bleed = np.where(self._closed, 0.0, excess) / dt
        self._bleed_s = dt

    def apply(self, levers: Levers) -> None:
        """Combine geometry, valve gates and faults into the conductances of the next step."""
        self._stale, self.restless = False, math.inf
        np.multiply(self.base, self.gate, out=self.conductance)
        for e, factor in levers.flow_factor.items():
            if e < self.layout.passive:
                self.conductance[e] *= factor
        for e, conductance in levers.conductance.items():
            self.conductance[e] = conductance
        self._gas_compliance()

    def reapply(self, levers: Levers) -> None:
        """The same, if there is any liquid property or gas that may have changed."""
        if self._stale or self.contents.gas_share > 0.0:
            self.apply(levers)

    def _gas_compliance(self) -> None:
        """Gas adds V/P to the compliance of the node where it is, or of the nodes at the ends of its edge."""
        contents = self.contents
        gas = contents.gas_by_node(self.barrel)
        self.compliance[:] = self.rest_compliance
        if gas is not None:
            free = self.ground == 0
            absolute = np.maximum(self.pressure + ATMOSPHERE_PA, 1e4)
            here = gas[self.hydraulic] * np.minimum(ATMOSPHERE_PA / absolute, 1.0) / absolute
            self.compliance[free] += here[free]

    def advance(self, h: float) -> None:
        """Move the pressures on by ``h`` seconds with the present sources; volumes are added up for the transport."""
        for swell in self.expansion:
            if swell.left:
                volume = swell.rate * h if abs(swell.rate) * h < abs(swell.left) else swell.left
                swell.left -= volume
                self.add(swell.edge, volume, h)
                self.source[swell.node] += volume / h
        if self._bleed_s > 0.0:
            part = min(h, self._bleed_s)
            self._bleed_s -= part
            absolute = np.maximum(self.pressure, 0.0) + ATMOSPHERE_PA
            worst = float(np.max(-self._bleed * part / (self.compliance * absolute)))
            if worst > AT_ONCE:
                self._advance_sucking(h, part, min(math.ceil(worst / AT_ONCE), MOST_STEPS))
                return
            self.source += self._bleed * (part / h)
        self._advance(h)

    def _advance(self, h: float) -> None:
        self.step, self.restless = advance_pressures(
            h, self.step, self.node, self.edge, self.link, self.ground, self.sensor, self.sensor_node, self._matrix
        )
        passive = self.layout.passive
        self.contents.pending[:passive] += self.volume
        self.flow[:passive] = self.volume / h

    def _advance_sucking(self, h: float, part: float, steps: int) -> None:
        """Gas that met a high pressure at once (a syringe changes over) draws much volume, less as the pressure falls.

        What it wants goes with 1 - P0/P, so it is found anew in short steps; the rest is seen at the next fit.
        """
        others, start = self.source.copy(), np.maximum(self.pressure, 1.0) + ATMOSPHERE_PA
        for _ in range(steps):
            now = np.maximum(self.pressure, 0.0) + ATMOSPHERE_PA
            wants = np.minimum((1.0 - ATMOSPHERE_PA / now) / (1.0 - ATMOSPHERE_PA / start), 1.0)
            self.source[:] = others + np.where(self._bleed < 0.0, wants, 1.0) * self._bleed * (part / h)
            self._advance(h / steps)
        self.source[:] = others

    def add(self, edge: int, volume: float, h: float) -> None:
        """A displacement by a syringe: known volume through an edge."""
        self.contents.pending[edge] += volume
        self.flow[edge] = volume / h
