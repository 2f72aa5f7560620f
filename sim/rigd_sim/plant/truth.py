"""The true state of the rig as named numbers, for checkers and tests."""

from __future__ import annotations

from typing import TYPE_CHECKING

from rigd_sim.physics.constants import BAR_PA, ML_M3, ML_MIN_M3_S, ZERO_CELSIUS_K

if TYPE_CHECKING:
    from rigd_sim.plant.rig_plant import RigPlant


def true_state(plant: RigPlant) -> dict[str, float]:
    """Keys: "pressure:", "peak-pressure:" (part) [bar]; "temperature:" (part) [degC]; "flow:" (line) [mL/min];
    "volume:" (vessel, floor) [mL]; "conversion:" (part) [1]; "level:" (pump) [mL] truly in the active syringe,
    "delivering:" (pump) [mL/min];
    "amount:" (vessel, species) [mmol]; "voidage:" (column); "position:" (valve) index of the open port, -1 shut.
    """
    state: dict[str, float] = {}
    _pressures(plant, state)
    _temperatures(plant, state)
    contents, layout = plant.contents, plant.layout
    for e, edge in enumerate(layout.edges):
        if edge.kind in ("line", "column", "regulator", "relief"):
            state[f"flow:{edge.id}"] = float(plant.flows.flow[e]) / ML_MIN_M3_S
    for vessel in (*layout.vessels, "floor"):
        node = layout.node_index[vessel]
        state[f"volume:{vessel}"] = contents.liquid_volume(node) / ML_M3
        for i, species in enumerate(contents.species):
            state[f"amount:{vessel}:{species}"] = float(contents.node_volume[node] * contents.node_c[node, i]) * 1e3
    for name, pump in plant.pumps.items():
        node = layout.syringes[name][pump.active].node
        state[f"delivering:{name}"] = pump.rate / ML_MIN_M3_S if pump.moving else 0.0
        state[f"level:{name}"] = (contents.node_volume[node] / ML_M3) - pump.spec.dead_mL
    for bed in contents.beds.values():
        state[f"voidage:{bed.column.id}"] = bed.voidage
    for name, valve in plant.valves.items():
        state[f"position:{name}"] = float(valve.open_port(plant.now_ns))
    _conversions(plant, state)
    return state


def _pressures(plant: RigPlant, state: dict[str, float]) -> None:
    flows = plant.flows
    for r, i in enumerate(flows.hydraulic):
        node = plant.layout.nodes[i]
        here, peak = float(flows.pressure[r]) / BAR_PA, float(flows.peak[r]) / BAR_PA
        for key in {node.id, node.part}:
            state[f"pressure:{key}"] = max(here, state.get(f"pressure:{key}", here))
            state[f"peak-pressure:{key}"] = max(peak, state.get(f"peak-pressure:{key}", peak))


def _temperatures(plant: RigPlant, state: dict[str, float]) -> None:
    contents = plant.contents
    for name, bed in contents.beds.items():
        rows = contents.temperature[bed.start : bed.start + bed.cells] - ZERO_CELSIUS_K
        state[f"temperature:{name}"] = float(rows[bed.cells // 2])
        state[f"temperature:{name}.max"] = float(rows.max())
        state[f"temperature:{name}.jacket"] = plant.thermal.jacket(name) - ZERO_CELSIUS_K
    for name, bath in plant.baths.items():
        state[f"temperature:{name}"] = bath.bath_K - ZERO_CELSIUS_K


def _conversions(plant: RigPlant, state: dict[str, float]) -> None:
    """Share of the reactant's carbon that is product: product / (product + reactant) at cells, columns and vessels."""
    chemistry, contents = plant.rig.chemistry, plant.contents
    if chemistry.reactant not in contents.species or chemistry.product not in contents.species:
        return
    left, made = contents.species.index(chemistry.reactant), contents.species.index(chemistry.product)
    parts = [c.id for c in plant.rig.cells] + [f"{c}.out" for c in contents.beds] + list(plant.layout.vessels)
    for part in parts:
        row = contents.node_c[plant.layout.node_index[part]]
        total = row[left] + row[made]
        state[f"conversion:{part.removesuffix('.out')}"] = float(row[made] / total) if total > 1e-6 else 0.0
