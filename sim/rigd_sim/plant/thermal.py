"""Heat of the rig: baths, jackets, beds; and the book that shows where every joule went."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigd.model.rig import RigDefinition
from rigd_sim.physics.bed import heat_bed
from rigd_sim.plant.bath_unit import JACKET_M3, RHO_CP_J_M3_K, BathUnit
from rigd_sim.plant.contents import Bed, Contents
from rigd_sim.plant.levers import BathLever, Levers

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
    """Temperatures of beds and baths, moved on after each transport step."""

    def __init__(self, rig: RigDefinition, contents: Contents, baths: dict[str, BathUnit]) -> None:
        self.contents, self.baths = contents, baths
        self.jacket_of = {c.id: c.jacket for c in rig.columns if c.jacket}
        for column, chiller in self.jacket_of.items():
            baths[chiller].jackets[column] = contents.room_K
        self.book = HeatBook()
        self._reference_K = contents.room_K
        self._work = np.empty((2, max([b.cells for b in contents.beds.values()], default=1)))

    def jacket(self, column: str) -> float:
        """Jacket temperature of a column [K]; the room's if it has none."""
        chiller = self.jacket_of.get(column)
        return self.baths[chiller].jackets[column] if chiller else self.contents.room_K

    def capacity(self, bed: Bed) -> float:
        """Heat capacity of one place [J/K]: liquid between and inside the beads, polymer, inner wall."""
        fluid = self.contents.fluid()
        liquid = self.contents.layout.edges[bed.edge].volume + bed.bead_liquid
        rho_cp = fluid.density(self.contents.room_K) * fluid.heat_capacity_J_kg_K
        return (liquid * rho_cp + bed.solid_J_K) / bed.cells

    def advance(self, dt: float, flow_m3_s: np.ndarray, levers: Levers) -> None:
        """Move beds, jackets and baths on by ``dt``."""
        room = self.contents.room_K
        taken: dict[str, float] = {}
        for bed in self.contents.beds.values():
            taken[bed.column.id] = self._bed(bed, dt, float(flow_m3_s[bed.edge]), room, levers)
        for name, bath in self.baths.items():
            bath.advance(dt, taken, levers.baths.get(name, HEALTHY), room)

    def _bed(self, bed: Bed, dt: float, flow: float, room: float, levers: Levers) -> float:
        contents = self.contents
        rows = slice(bed.start, bed.start + bed.cells)
        released = contents.released[rows]
        extra = levers.exotherm_W.get(bed.column.id, 0.0)
        if extra:
            released += extra * dt / bed.cells
        self.book.reaction += float(released.sum())
        fluid = contents.fluid()
        stream = fluid.density(room) * fluid.heat_capacity_J_kg_K * flow
        t = contents.temperature[rows]
        wall = bed.column.wall_conductance_W_K / bed.cells
        axial = BED_CONDUCTIVITY_W_M_K * bed.section / (bed.length / bed.cells)
        given = heat_bed(
            contents.place, bed.start, bed.cells, dt, self.capacity(bed), stream, room, axial, wall,
            self.jacket(bed.column.id), END_LOSS_W_K, room, self._work,
        )  # fmt: skip
        outlet = t[-1] if stream >= 0.0 else t[0]
        self.book.stream += abs(stream) * (room - float(outlet)) * dt
        self.book.room += END_LOSS_W_K * (2.0 * room - float(t[0]) - float(t[-1])) * dt
        if bed.column.id not in self.jacket_of:
            self.book.room += given
        return given

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
