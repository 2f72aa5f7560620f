"""Heat of the rig: baths, jackets, beds, tubes; and the book that shows where every joule went."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigd.model.rig import RigDefinition
from rigd_sim.physics.tubing import loss_conductance
from rigd_sim.physics.warmth import (
    CAPACITY,
    CONDUCTION,
    END,
    EXTRA,
    GIVEN,
    HEAT_ROWS,
    INLET,
    JACKET,
    LINE_ROWS,
    LOST,
    MEAN,
    MIDDLE,
    SEEN,
    TRANSFER,
    WALL,
    heat_step,
)
from rigd_sim.plant.bath_unit import JACKET_M3, RHO_CP_J_M3_K, BathUnit
from rigd_sim.plant.contents import Contents
from rigd_sim.plant.levers import BathLever, Levers
from rigd_sim.plant.packing import Bed

BED_CONDUCTIVITY_W_M_K = 0.3
END_LOSS_W_K = 0.004
"""Unjacketed frit and fitting at each end of a column (common practice, no source)."""
HEALTHY = BathLever()


@dataclass(slots=True)
class HeatBook:
    """Energy that crossed the border of the rig since the start [J]; positive into the rig."""

    reaction: float = 0.0
    stream: float = 0.0
    room: float = 0.0


class Thermal:
    """Temperatures of beds, tubes and baths, moved on after each transport step.

    ``node_K`` is the temperature of every node of the layout, ``contents.line_K`` the mean one of every edge. Heat
    capacity per volume is that of the solvent at the declared room temperature, everywhere and always, so that no
    energy is made.
    """

    def __init__(self, rig: RigDefinition, contents: Contents, baths: dict[str, BathUnit]) -> None:
        self.contents, self.baths = contents, baths
        self.jacket_of = {c.id: c.jacket for c in rig.columns if c.jacket}
        for column, chiller in self.jacket_of.items():
            baths[chiller].jackets[column] = contents.room_K
        self.book = HeatBook()
        self._reference_K = contents.room_K
        fluid = contents.fluid()
        self.rho_cp = fluid.density(contents.room_K) * fluid.heat_capacity_J_kg_K
        self._make_tables(fluid.conductivity_W_m_K)

    def _make_tables(self, conductivity: float) -> None:
        layout, room = self.contents.layout, self.contents.room_K
        self._beds = list(self.contents.beds.values())
        self._ends = np.array([[e.a for e in layout.edges], [e.b for e in layout.edges]], dtype=np.int64)
        self._line = np.zeros((LINE_ROWS, len(layout.edges)))
        self._line[INLET:SEEN] = room
        self.contents.line_K, self.contents.line_seen_K = self._line[MIDDLE], self._line[SEEN]
        for e, edge in enumerate(layout.edges):
            if edge.kind == "line":
                self._line[TRANSFER, e] = loss_conductance(conductivity, edge.length, edge.diameter)
            elif edge.kind == "column":
                self._line[TRANSFER, e] = -1.0
        self.node_K = np.full(len(layout.nodes), room)
        self._sums = np.zeros((2, len(layout.nodes)))
        self._stretch = np.array(
            [[b.edge for b in self._beds], [b.start for b in self._beds], [b.cells for b in self._beds]], dtype=np.int64
        ).reshape(3, len(self._beds))
        self._heat = np.zeros((HEAT_ROWS, len(self._beds)))
        for b, bed in enumerate(self._beds):
            self._heat[CAPACITY, b] = self.capacity(bed)
            self._heat[CONDUCTION, b] = BED_CONDUCTIVITY_W_M_K * bed.section / (bed.length / bed.cells)
            self._heat[WALL, b] = bed.column.wall_conductance_W_K / bed.cells
            self._heat[END, b] = END_LOSS_W_K
            self._heat[MEAN, b] = room
        self._work = np.empty((2, max([b.cells for b in self._beds], default=1)))

    def jacket(self, column: str) -> float:
        """Jacket temperature of a column [K]; the room's if it has none."""
        chiller = self.jacket_of.get(column)
        return self.baths[chiller].jackets[column] if chiller else self.contents.room_K

    def capacity(self, bed: Bed) -> float:
        """Heat capacity of one place [J/K]: liquid between and inside the beads, polymer, inner wall."""
        liquid = self.contents.layout.edges[bed.edge].volume + bed.bead_liquid
        return (liquid * self.rho_cp + bed.solid_J_K) / bed.cells

    def advance(self, dt: float, flow_m3_s: np.ndarray, levers: Levers) -> None:
        """Move beds, jackets and baths on by ``dt``; tubes follow at once."""
        room, heat = self.contents.room_K, self._heat
        for b, bed in enumerate(self._beds):
            heat[JACKET, b] = self.jacket(bed.column.id)
            heat[EXTRA, b] = levers.exotherm_W.get(bed.column.id, 0.0)
        self.contents.warmed_K = heat_step(
            dt, self.rho_cp, room, flow_m3_s, self._ends, self._line, self.node_K, self._stretch, heat,
            self.contents.place, self._work, self._sums,
        )  # fmt: skip
        taken: dict[str, float] = {}
        book = self.book
        for b, bed in enumerate(self._beds):
            given, reacted, stream, lost = heat[GIVEN : LOST + 1, b].tolist()
            taken[bed.column.id] = given
            book.reaction += reacted
            book.stream += stream
            book.room += lost + (0.0 if bed.column.id in self.jacket_of else given)
        for name, bath in self.baths.items():
            bath.advance(dt, taken, levers.baths.get(name, HEALTHY), room)

    def stored(self) -> float:
        """Heat held by beds, jackets and baths above the room temperature of the start [J]."""
        room, total = self._reference_K, 0.0
        for bed in self.contents.beds.values():
            total += self.capacity(bed) * float(
                (self.contents.temperature[bed.start : bed.start + bed.cells] - room).sum()
            )
        for bath in self.baths.values():
            total += bath.spec.bath_mL * 1e-6 * RHO_CP_J_M3_K * (bath.bath_K - room)
            total += sum(JACKET_M3 * RHO_CP_J_M3_K * (t - room) for t in bath.jackets.values())
        return total

    def crossed(self) -> float:
        """Net heat that came in since the start [J]; equals ``stored`` when the book is right."""
        b = self.book
        baths = sum(bath.heater_J - bath.lost_J for bath in self.baths.values())
        return b.reaction + b.stream + b.room + baths
