"""What is in the rig: arrays of compositions, temperatures and activities, and the step that moves them on.

Columns of every composition: species [mol/m3], then one volume fraction per property set (solvent), then gas (its
volume at atmospheric pressure per volume; at higher pressure it fills less: ``physics.gas``). Amounts and volumes are
kept to rounding whatever the flows do.
"""

from __future__ import annotations

import math

import numpy as np

from rigd.model.rig import RigDefinition
from rigd_sim.physics.bed import FILM, HOLD, LIQUID, PLACE_ROWS, RATE, RELEASED, SIZE, TEMPERATURE, TURNOVER
from rigd_sim.physics.compiled import Floats, Ints
from rigd_sim.physics.constants import ML_M3, ZERO_CELSIUS_K
from rigd_sim.physics.gas import gas_at_nodes
from rigd_sim.physics.packing_transfer import bead_rate, chung_wen, film_coefficient
from rigd_sim.physics.properties import Solvent, solvents_of
from rigd_sim.physics.transport import (
    BASE,
    EDGE_ROWS,
    LEAST,
    LINK_ROWS,
    MARK_ROWS,
    MIXING,
    NODE_ROWS,
    PACKED,
    SPREAD,
    WARMTH,
    transport_step,
)
from rigd_sim.physics.tubing import ring_exchange, ring_velocities
from rigd_sim.plant.ageing import age
from rigd_sim.plant.layout import Layout
from rigd_sim.plant.packing import Bed, Kinetics

DEFAULT_DIFFUSIVITY = 1e-9
SUPPLY_COARSENESS = 8.0
SMEARING = 0.2
EMPTY_M3 = 1e-9
NEARLY_EMPTY_M3 = 2e-6
TORTUOUS = 0.7
"""1/tortuosity of a packed bed at rest (common practice, no source)."""


class Contents:
    """All liquid and its heat. ``node_volume``, ``cells`` and so on are shared with the compiled kernels."""

    def __init__(self, rig: RigDefinition, layout: Layout) -> None:
        self.layout = layout
        self.species = [s.id for s in rig.chemistry.species]
        self.sets = solvents_of(rig)
        self.solvents = list(self.sets)
        self.n_species = len(self.species)
        self.width = self.n_species + len(self.solvents) + 1
        self.gas = self.width - 1
        self.kinetics = Kinetics(rig)
        self.room_K = rig.simulation.ambient_degC + ZERO_CELSIUS_K
        self.gas_share = 0.0
        self.squeeze = np.ones(len(layout.nodes))
        self.line_K = np.full(len(layout.edges), self.room_K)
        self.line_seen_K = np.zeros(len(layout.edges))
        self.warmed_K = math.inf
        self.diffusivity = max((s.diffusivity_m2_s for s in rig.chemistry.species), default=DEFAULT_DIFFUSIVITY)
        self._make_edges()
        self._make_nodes(rig)
        self._make_beds()
        self._make_dispersion()
        self._rho, self._mu = self.fluid().density(self.room_K), self.fluid().viscosity(self.room_K)
        wide = max(self.width, self.kinetics.count, int(self.cell_count.max()) + 1)
        self._scratch = (np.zeros((len(layout.nodes), self.width)), np.zeros((8, wide)))

    def _make_edges(self) -> None:
        """Tables of the transport kernel; the attributes are views into them.

        A tube is several kernel edges, one per ring; ``owner`` is the layout edge of each and ``share`` its part of
        the flow. ``pending`` is per layout edge, ``first`` the first kernel edge of each.
        """
        edges = self.layout.edges
        self.pending = np.zeros(len(edges))
        self.owner = np.array([e for e, edge in enumerate(edges) for _ in range(edge.rings)], dtype=np.int64)
        self.first = np.searchsorted(self.owner, np.arange(len(edges)))
        count = len(self.owner)
        self.link = np.zeros((LINK_ROWS, count), dtype=np.int64)
        self.edge = np.zeros((EDGE_ROWS, count))
        self.ea, self.eb, self.cell_count, self.cell_start = self.link[:BASE]
        self.cell_volume, self.fill, self.moved, self.exchange, self.radial = self.edge[:LEAST]
        self.share = np.concatenate([np.array(ring_velocities(e.rings)) / e.rings for e in edges])
        for i, e in enumerate(self.owner):
            edge = edges[e]
            self.ea[i], self.eb[i], self.cell_count[i] = edge.a, edge.b, edge.cells
            self.cell_volume[i] = edge.volume / edge.cells / edge.rings if edge.cells else 0.0
            self.link[PACKED, i] = edge.kind == "column"
            self.edge[LEAST, i] = self.cell_volume[i] * (SUPPLY_COARSENESS if edge.supply else edge.rings)
        slots = np.where(self.cell_count > 0, self.cell_count + 1, 0)
        self.link[BASE, 1:] = np.cumsum(2 * slots)[:-1]
        self.cell_start[:] = self.link[BASE] + slots // 2
        self.cells = np.zeros((int(2 * slots.sum()), self.width))
        self.edge[SPREAD] = SMEARING**0.5 * self.cell_volume * self.cell_count
        self.edge[WARMTH] = self.room_K

    def slots(self, e: int) -> Ints:
        """Rows of ``cells`` that hold the liquid of layout edge ``e`` now, all rings."""
        first = int(self.first[e])
        rings = range(first, first + self.layout.edges[e].rings)
        return np.concatenate([np.arange(self.cell_count[i] + 1) + self.cell_start[i] for i in rings])

    def _make_nodes(self, rig: RigDefinition) -> None:
        nodes = self.layout.nodes
        self.node = np.zeros((NODE_ROWS, len(nodes)))
        self.mark = np.zeros((MARK_ROWS, len(nodes)), dtype=np.int64)
        self.node_volume, self.endless = self.node[0], self.mark[0]
        self.node_volume[:] = [n.volume for n in nodes]
        self.endless[:] = [n.endless for n in nodes]
        solvent = self.composition(rig, next(q.id for q in rig.liquids if q.role == "solvent"))
        self.node_c = np.tile(solvent, (len(nodes), 1))
        self.cells[:] = solvent
        self.hidden: dict[str, Floats] = {}
        self._vessels = [
            (self.layout.node_index[v.id], v.id, v.capacity_mL * ML_M3) for v in self.layout.vessels.values()
        ]
        starts = np.array([e.a for e in self.layout.edges])
        self._bottles = [(i, np.flatnonzero(starts == i)) for i, _, _ in self._vessels if (starts == i).any()]
        for vessel in rig.vessels:
            if vessel.liquid:
                self.node_c[self.layout.node_index[vessel.id]] = self.composition(rig, vessel.liquid)
        air = np.zeros(self.width)
        air[self.gas] = 1.0
        self.node_c[self.layout.node_index["air"]] = air

    def composition(self, rig: RigDefinition, liquid_id: str) -> Floats:
        """The row of a declared liquid."""
        liquid = next(q for q in rig.liquids if q.id == liquid_id)
        row = np.zeros(self.width)
        for name, value in liquid.composition_mol_L.items():
            row[self.species.index(name)] = value * 1e3
        row[self.n_species + self.solvents.index(liquid.properties)] = 1.0
        return row

    def _make_beds(self) -> None:
        self.beds: dict[str, Bed] = {}
        start = 0
        for column in self.layout.columns.values():
            edge = self.layout.edge_index[column.id]
            cells = self.layout.edges[edge].cells
            self.beds[column.id] = Bed(column, edge, int(self.first[edge]), start, cells)
            volume, length = self.layout.edges[edge].volume, self.layout.edges[edge].length
            self.beds[column.id].per_dx = volume / length / (length / cells)
            start += cells
        beds = list(self.beds.values())
        self.bed = np.array([[b.kernel for b in beds], [b.start for b in beds]], dtype=np.int64)
        self.beads = np.tile(self.cells[0], (start, 1)) if start else np.zeros((0, self.width))
        self.bed_rate = np.zeros((HOLD + self.width, len(beds)))
        for b, bed in enumerate(beds):
            self.bed_rate[LIQUID, b] = bed.bead_liquid / bed.cells
            self.bed_rate[RATE, b] = bead_rate(
                bed.column.packing.pore_diffusion * self.diffusivity, bed.bead_diameter / 2
            )
            self.bed_rate[SIZE, b] = bed.pore_size
            self.bed_rate[HOLD : HOLD + self.gas, b] = self.bed_rate[LIQUID, b]
            for name, constant in bed.column.packing.retention.items():
                self.bed_rate[HOLD + self.species.index(name), b] += constant * bed.solid / bed.cells
        self.bead_volume = self.bed_rate[LIQUID]
        self.place = np.zeros((PLACE_ROWS, start))
        self.temperature, self.released, self.turnover = (
            self.place[TEMPERATURE],
            self.place[RELEASED],
            self.place[TURNOVER],
        )
        self.temperature[:] = self.room_K
        self.activity = np.ones((start, self.kinetics.count))
        self.base_activity = np.ones((start, self.kinetics.count))
        for bed in beds:
            self._rest_activity(bed)
        self.fresh = self.base_activity.copy()

    def _rest_activity(self, bed: Bed) -> None:
        """Fresh packing: 1 where it is a catalyst, its mass per interstitial litre where a rate is per gram."""
        packing = bed.column.packing
        rows = slice(bed.start, bed.start + bed.cells)
        grams_per_L = packing.mass_g / (self.layout.edges[bed.edge].volume * 1e3)
        for j in range(self.kinetics.count):
            if self.kinetics.on_bed[j]:
                factor = grams_per_L if self.kinetics.per_gram[j] else 1.0
                self.base_activity[rows, j] = factor if packing.catalyst else 0.0
        self.activity[rows] = self.base_activity[rows]

    def solvent_of(self, row: Floats) -> dict[str, float]:
        """Volume fractions of the property sets in a composition, gas left out."""
        return {
            s: float(row[self.n_species + i]) for i, s in enumerate(self.solvents) if row[self.n_species + i] > 1e-9
        }

    def fluid(self) -> Solvent:
        """The property set that stands for densities and heat capacities (the first declared)."""
        return self.sets[self.solvents[0]]

    def _make_dispersion(self) -> None:
        """Tubes: molecular diffusion along each ring, radial exchange between rings (constants of the tube)."""
        for e, edge in enumerate(self.layout.edges):
            if edge.cells and edge.kind == "line":
                i = int(self.first[e])
                rings = slice(i, i + edge.rings)
                section, dx = edge.volume / edge.length / edge.rings, edge.length / edge.cells
                self.exchange[rings] = self.diffusivity * section / dx
                if edge.rings > 1:
                    self.edge[MIXING, rings] = self.diffusivity / (0.5 * edge.diameter) ** 2
                self.radial[i : i + edge.rings - 1] = ring_exchange(self.diffusivity, edge.diameter, edge.rings)

    def disperse(self, flow: Floats) -> None:
        """Set the dispersion coefficients of the beds from the flows [m3/s] of the last step."""
        for b, bed in enumerate(self.beds.values()):
            superficial = abs(flow.item(bed.edge)) / bed.section
            if superficial != bed.dispersed_at:
                bed.dispersed_at = superficial
                re = self._rho / self._mu * superficial * bed.bead_diameter
                coefficient = chung_wen(re, self._mu, self._rho) + TORTUOUS * self.diffusivity
                self.exchange[bed.kernel] = coefficient * bed.per_dx
                schmidt = self._mu / self._rho / self.diffusivity
                packing = bed.column.packing
                film = film_coefficient(re, schmidt, packing.voidage, self.diffusivity, bed.bead_diameter)
                self.bed_rate[FILM, b] = film * bed.surface

    def advance(self, dt: float) -> None:
        """Carry the pending volumes through, react and disperse over ``dt``; pending is then zero."""
        k = self.kinetics
        np.multiply(self.pending[self.owner], self.share, out=self.moved)
        if k.in_tubes:
            self.edge[WARMTH] = self.line_K[self.owner]
        self.gas_share = transport_step(
            dt, self.link, self.edge, self.cells, self.node, self.node_c, self.mark, self.bed, self.bed_rate,
            self.beads, self.place, self.activity, k.table, k.species, k.in_tubes, self.room_K, *self._scratch,
        )  # fmt: skip
        self.pending[:] = 0.0

    def age(self, dt: float) -> None:
        """Loss of activity over ``dt`` (``rigd_sim.plant.ageing``); what is leached goes into the liquid."""
        if self.kinetics.ages:
            age(self, dt)

    def poison(self, factors: dict[str, float]) -> None:
        """Set the activity of whole columns to a share of what ageing has left (faults)."""
        self.activity[:] = self.base_activity
        for name, factor in factors.items():
            bed = self.beds[name]
            rows = slice(bed.start, bed.start + bed.cells)
            self.activity[rows] *= np.where(self.kinetics.on_bed, factor, 1.0)

    def admit_air(self) -> None:
        """Let air into bottles that the pending volumes would draw below empty."""
        held_in = self.node_volume.item
        for i, leaving in self._bottles:
            if held_in(i) > NEARLY_EMPTY_M3:
                continue
            wanted = float(self.pending[leaving].sum())
            short = wanted + EMPTY_M3 - self.node_volume[i]
            if wanted > 0.0 and short > 0.0:
                held = self.node_volume[i]
                self.node_c[i] *= held / (held + short)
                self.node_c[i, self.gas] += short / (held + short)
                self.node_volume[i] = held + short
                self.gas_share = 1.0

    def spill(self, capacity: dict[str, float]) -> None:
        """What does not fit into a vessel runs to the floor."""
        floor = self.layout.node_index["floor"]
        held_in = self.node_volume.item
        for i, name, size in self._vessels:
            excess = held_in(i) - capacity.get(name, size)
            if excess > 0.0 and not self.endless[i]:
                held = self.node_volume[floor]
                self.node_c[floor] = (held * self.node_c[floor] + excess * self.node_c[i]) / (held + excess)
                self.node_volume[floor] = held + excess
                self.node_volume[i] -= excess

    def gas_by_node(self, barrel: list[tuple[int, int]]) -> Floats | None:
        """Gas at each node: its own, and half of what is in each edge that ends there; ``None`` without any.

        Gas in a syringe at work (``barrel``: its node, the pump's outlet) yields to the pressure at the outlet.
        """
        if self.gas_share <= 0.0:
            return None
        own = np.zeros(len(self.node_volume))
        gas_at_nodes(self.link, self.edge, self.cells, self.node, self.node_c, self.mark, own)
        for syringe, out in barrel:
            own[out] += own[syringe]
        return own

    def hide(self, vessel: str, hidden: bool) -> None:
        """A bottle whose dip tube draws air (``hidden``), or again its liquid."""
        i = self.layout.node_index[vessel]
        if hidden and vessel not in self.hidden:
            self.hidden[vessel] = self.node_c[i].copy()
            self.node_c[i] = self.node_c[self.layout.node_index["air"]]
            self.endless[i] = 1
        elif not hidden and vessel in self.hidden:
            self.node_c[i] = self.hidden.pop(vessel)
            self.endless[i] = 0

    def liquid_volume(self, node: int) -> float:
        """Liquid in a node [m3], gas left out."""
        return float(self.node_volume[node] * (1.0 - self.node_c[node, self.gas] * self.squeeze[node]))

    def totals(self) -> Floats:
        """Total of every column over the whole rig (volume-weighted), then the volume of liquid and of gas at
        atmospheric pressure: what must be conserved."""
        result = np.zeros(self.width + 1)
        finite = self.endless == 0
        weight = self.node_volume[finite]
        result[:-1] += weight @ self.node_c[finite]
        for vessel, composition in self.hidden.items():
            held = self.node_volume[self.layout.node_index[vessel]]
            result[:-1] += held * composition
        for e in np.flatnonzero(self.cell_count):
            n, s, v = int(self.cell_count[e]), int(self.cell_start[e]), self.cell_volume[e]
            held = np.full(n + 1, v)
            held[0], held[n] = self.fill[e], v - self.fill[e]
            result[:-1] += held @ self.cells[s : s + n + 1]
        for b, bed in enumerate(self.beds.values()):
            held = self.bed_rate[HOLD : HOLD + self.width, b]
            result[:-1] += held * self.beads[bed.start : bed.start + bed.cells].sum(axis=0)
        result[-1] = result[self.n_species : -1].sum()
        return result
