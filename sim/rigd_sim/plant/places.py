"""Which true value a tag's ``at`` means."""

from __future__ import annotations

from typing import TYPE_CHECKING

from rigd.model.rig import Tag, TagKind
from rigd_sim.physics.constants import ML_M3, ML_MIN_M3_S, ZERO_CELSIUS_K
from rigd_sim.plant.instruments import Sensor, Truth

if TYPE_CHECKING:
    from rigd_sim.plant.rig_plant import RigPlant

WET_FLOOR_M3 = 1e-7


def make_sensors(plant: RigPlant) -> None:
    """Build a sensor for every measured tag; pressures are followed by the network solver."""
    own = set(plant.pumps) | set(plant.valves) | set(plant.baths)
    units = {d.id: d.unit for d in plant.rig.devices}
    cells = {c.device for c in plant.rig.cells}
    nodes: list[int] = []
    lags: list[float] = []
    for tag in plant.rig.tags:
        if tag.kind is TagKind.DERIVED or not tag.device or units.get(tag.device) in own or tag.device in cells:
            continue
        if tag.measures == "pressure":
            plant.instruments.add(Sensor(tag, lambda: 0.0, slot=len(nodes)))
            nodes.append(plant.layout.point(tag.at))
            lags.append(tag.lag_s)
        else:
            plant.instruments.add(Sensor(tag, _truth(plant, tag)))
    plant.flows.watch(nodes, lags)
    plant.instruments.advance(0.0)


def _truth(plant: RigPlant, tag: Tag) -> Truth:
    if tag.measures == "temperature":
        return _temperature(plant, tag.at)
    if tag.measures == "flow":
        return _flow(plant, tag.at)
    if tag.measures == "fraction":
        return _conversion(plant, tag.at)
    return _level(plant, tag)


def _temperature(plant: RigPlant, at: str) -> Truth:
    part, _, place = at.partition(".")
    contents = plant.contents
    if part in contents.beds:
        bed = contents.beds[part]
        if place == "jacket":
            return lambda: plant.thermal.jacket(part) - ZERO_CELSIUS_K
        offset = {"inlet": 0, "outlet": bed.cells - 1}.get(place, bed.cells // 2)
        return lambda: float(contents.temperature[bed.start + offset]) - ZERO_CELSIUS_K
    if part in plant.baths:
        return lambda: plant.baths[part].bath_K - ZERO_CELSIUS_K
    try:
        node = plant.layout.point(at)
    except KeyError:  # not on the way of the liquid: the room
        return lambda: contents.room_K - ZERO_CELSIUS_K
    return lambda: float(plant.thermal.node_K[node]) - ZERO_CELSIUS_K


def _flow(plant: RigPlant, at: str) -> Truth:
    """Flow through a line, or through the edge that enters a part."""
    layout = plant.layout
    edge = layout.edge_index.get(at)
    if edge is None:
        node = layout.point(at)
        edge = next(e for e, ends in enumerate(layout.edges) if ends.b == node and ends.kind == "line")
    return lambda: float(plant.flows.flow[edge]) / ML_MIN_M3_S


def _conversion(plant: RigPlant, at: str) -> Truth:
    """Share of the reactant that has become product where an analyser sits: product / (product + reactant)."""
    species, chemistry = plant.contents.species, plant.rig.chemistry
    if chemistry.reactant not in species or chemistry.product not in species:
        return lambda: 0.0
    node = plant.layout.point(at)
    left, made = species.index(chemistry.reactant), species.index(chemistry.product)

    def share() -> float:
        row = plant.contents.node_c[node]
        total = row[left] + row[made]
        return float(row[made] / total) if total > 1e-6 else 0.0

    return share


def _level(plant: RigPlant, tag: Tag) -> Truth:
    """Volume or mass in a vessel; a state is 1 when a vessel is full or the floor is wet."""
    layout, contents = plant.layout, plant.contents
    vessel = layout.vessels.get(tag.at)
    node = layout.node_index[vessel.id if vessel else "floor"]
    if tag.measures in ("state", "position"):
        limit = vessel.capacity_mL * ML_M3 if vessel else WET_FLOOR_M3
        return lambda: float(contents.node_volume[node] >= limit)
    factor = contents.fluid().density(contents.room_K) * 1e-3 if tag.measures == "mass" else 1.0
    return lambda: factor * contents.liquid_volume(node) / ML_M3
