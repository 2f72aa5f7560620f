"""Small rigs built in code for tests of the plant; every number is invented unless a test names a source."""

from __future__ import annotations

from dataclasses import replace

from rigd.model.chemistry import Band, Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.devices import ChannelSpec, DeviceSpec
from rigd.model.orders import Action
from rigd.model.rig import (
    Cell,
    Chiller,
    Column,
    End,
    Line,
    Liquid,
    LiquidRole,
    Packing,
    Pump,
    Regulator,
    RigDefinition,
    Simulation,
    Tag,
    TagKind,
    Tee,
    Valve,
    Vessel,
    VesselRole,
)
from rigd_sim.plant import RigPlant

S_NS = 1_000_000_000
PARTS = (
    "vessels", "pumps", "valves", "tees", "columns", "cells", "regulators", "chillers", "lines", "tags", "devices"
)  # fmt: skip


def esterification(deactivation_per_h: float = 0.0) -> Chemistry:
    """Reversible second-order reaction on the packing (invented, as in configs/chemistry)."""
    species = (
        Species("ethanol", "ethanol", 46.07, bands=(Band(1047.0, 22.0, 20.0),)),
        Species("acid", "acetic acid", 60.05, bands=(Band(1715.0, 34.0, 330.0),)),
        Species("ester", "ethyl acetate", 88.11, bands=(Band(1740.0, 24.0, 380.0),)),
        Species("water", "water", 18.02),
    )
    reaction = Reaction(
        "esterification", {"acid": -1, "ethanol": -1, "ester": 1, "water": 1}, RateLaw.REVERSIBLE,
        ReactionPlace.CATALYST, 0.001625, 60.0, 58.0, {"acid": 1, "ethanol": 1}, {"ester": 1, "water": 1}, 4.0,
        heat_kJ_mol=-4.5,
        deactivation_per_h=deactivation_per_h,
    )  # fmt: skip
    return Chemistry("esterification", species, (reaction,), "acid", "ester")


def tracer(k_per_s: float = 0.0, reference_degC: float = 25.0) -> Chemistry:
    """A -> P, first order on the packing; k = 0: A is an inert tracer."""
    species = (Species("A", "A", 100.0), Species("P", "P", 100.0))
    reaction = Reaction(
        "AP", {"A": -1, "P": 1}, RateLaw.POWER, ReactionPlace.CATALYST, k_per_s, reference_degC, 0.0, {"A": 1}
    )
    return Chemistry("tracer", species, (reaction,) if k_per_s else (), "A", "P")


def pump(name: str, syringes: int = 2, **changes: float) -> Pump:
    """A 10.30 mm, 5 mL pump."""
    base = Pump(name, f"{name}-dev", syringes, 10.30, 5.0, 0.001, 20.0, 8.0, 20.0, dead_mL=0.02, compliance_mL_bar=0.01)
    return replace(base, **changes)  # type: ignore[arg-type]


def line(name: str, start: str, end: str, bore_mm: float = 0.5, length_mm: float = 300.0) -> Line:
    """A tube; "V.port" names a valve port."""
    ends = [End(*text.split(".", 1)) for text in (start, end)]
    return Line(name, ends[0], ends[1], bore_mm, length_mm, 70.0)


def device(name: str, unit: str, channels: tuple[str, ...] = ()) -> DeviceSpec:
    """A device without a link."""
    specs = tuple(ChannelSpec(c, f"{name}.{c}", S_NS) for c in channels)
    return DeviceSpec(name, "x", "bracket", "bus", "11", unit, specs)


def pressure_tag(name: str, at: str, channel: str, noise: float = 0.0, lag_s: float = 0.0) -> Tag:
    """A pressure sensor 0..25 bar on the device "sensors"."""
    return Tag(
        name, name, TagKind.MEASURED, "pressure", "bar", 0.0, 25.0, "sensors", channel, S_NS // 5, S_NS, at,
        noise=noise, lag_s=lag_s,
    )  # fmt: skip


def temperature_tag(name: str, at: str, channel: str) -> Tag:
    """A temperature sensor -50..150 degC."""
    return Tag(
        name, name, TagKind.MEASURED, "temperature", "degC", -50.0, 150.0, "sensors", channel, S_NS, 5 * S_NS, at,
        noise=0.05, lag_s=3.0,
    )  # fmt: skip


def rig_of(chemistry: Chemistry, liquids: tuple[Liquid, ...], **parts: object) -> RigDefinition:
    """A rig definition from its parts; what is not given is empty."""
    empty = dict.fromkeys(PARTS, ())
    values = {**empty, **parts}
    return RigDefinition(
        name="test", title="test", scan_ns=S_NS // 10, chemistry=chemistry, liquids=liquids, interlocks=(), alarms=(),
        links=(), **values,  # type: ignore[arg-type]
    )  # fmt: skip


def two_pump_rig(chemistry: Chemistry | None = None, **truth: float) -> RigDefinition:
    """Two dual pumps, tee, jacketed column, IR cell, regulator, outlet valve: the demonstration rig in code."""
    liquids = (
        Liquid("solvent", "ethanol", LiquidRole.SOLVENT, "ethanol", {"ethanol": 17.0}),
        Liquid("acid-feed", "acid", LiquidRole.REAGENT, "ethanol", {"acid": 2.0, "ethanol": 15.1}),
        Liquid("alcohol-feed", "ethanol", LiquidRole.REAGENT, "ethanol", {"ethanol": 17.0}),
    )
    packing = Packing("resin", True, 0.2, 0.38, 0.31, 1.1, 1.6, 300.0, 0.004, 4.7)
    return rig_of(
        chemistry or esterification(),
        liquids,
        vessels=(
            Vessel("bottle-S", VesselRole.SUPPLY, 1000.0, 900.0, "solvent"),
            Vessel("bottle-A", VesselRole.SUPPLY, 250.0, 230.0, "acid-feed"),
            Vessel("bottle-B", VesselRole.SUPPLY, 250.0, 230.0, "alcohol-feed"),
            Vessel("flask", VesselRole.COLLECT, 250.0),
            Vessel("waste", VesselRole.WASTE, 2000.0),
        ),
        pumps=(pump("PU-A", rate_max_mL_min=5.0), pump("PU-B", rate_max_mL_min=5.0)),
        valves=(
            Valve("V-A", "valve-a", ("solvent", "reagent"), "solvent", 1.0, 20.0),
            Valve("V-B", "valve-b", ("solvent", "reagent"), "solvent", 1.0, 20.0),
            Valve("V-C", "valve-c", ("waste", "collect", "shut"), "waste", 1.0, 20.0),
        ),
        tees=(Tee("TEE", 0.004, 100.0),),
        columns=(Column("COL", 6.6, 100.0, 40.0, packing, "CH"),),
        cells=(Cell("IR", "ir", 0.04, 25.0, 20.0, 5 * S_NS),),
        regulators=(Regulator("BPR", 2.0, 20.0),),
        chillers=(Chiller("CH", "chiller", -10.0, 95.0, 20.0),),
        lines=(
            line("L-S1", "bottle-S", "V-A.solvent", 1.0, 500.0),
            line("L-A1", "bottle-A", "V-A.reagent", 1.0, 500.0),
            line("L-A2", "V-A", "PU-A", 1.0, 150.0),
            line("L-A3", "PU-A", "TEE", 0.5, 600.0),
            line("L-S2", "bottle-S", "V-B.solvent", 1.0, 500.0),
            line("L-B1", "bottle-B", "V-B.reagent", 1.0, 500.0),
            line("L-B2", "V-B", "PU-B", 1.0, 150.0),
            line("L-B3", "PU-B", "TEE", 0.5, 900.0),
            line("L-1", "TEE", "COL", 0.5, 300.0),
            line("L-2", "COL", "IR", 0.5, 250.0),
            line("L-3", "IR", "BPR", 0.5, 250.0),
            line("L-4", "BPR", "V-C", 0.5, 200.0),
            line("L-5", "V-C.collect", "flask", 0.5, 250.0),
            line("L-6", "V-C.waste", "waste", 0.5, 250.0),
        ),
        tags=(
            pressure_tag("PT-1", "TEE", "p1", 0.01, 0.05),
            pressure_tag("PT-2", "IR", "p2", 0.01, 0.05),
            temperature_tag("TT-1", "COL.middle", "t1"),
            temperature_tag("TT-2", "COL.jacket", "t2"),
        ),
        devices=(
            device("pump-a", "PU-A"),
            device("pump-b", "PU-B"),
            device("valve-a", "V-A"),
            device("valve-b", "V-B"),
            device("valve-c", "V-C"),
            device("sensors", ""),
            device("chiller", "CH"),
            device("ir", ""),
        ),
        simulation=Simulation(seed=7, truth=truth),
    )


def column_rig(chemistry: Chemistry, packing: Packing, bore_mm: float = 6.6, length_mm: float = 100.0) -> RigDefinition:
    """One pump straight into one column and a flask, with tubes too short to matter."""
    liquids = (
        Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),
        Liquid("feed", "A in water", LiquidRole.REAGENT, "water", {"A": 1.0}),
    )
    return rig_of(
        chemistry,
        liquids,
        vessels=(
            Vessel("bottle", VesselRole.SUPPLY, 1000.0, 900.0, "feed"),
            Vessel("flask", VesselRole.COLLECT, 1000.0),
        ),
        pumps=(pump("PU", 1, stroke_mL=50.0, rate_max_mL_min=50.0, dead_mL=0.0),),
        columns=(Column("COL", bore_mm, length_mm, 40.0, packing),),
        lines=(
            line("L-0", "bottle", "PU", 1.0, 10.0),
            line("L-1", "PU", "COL", 0.5, 0.5),
            line("L-2", "COL", "flask", 0.5, 0.5),
        ),
        devices=(device("pump", "PU"),),
        simulation=Simulation(ambient_degC=25.0),
    )


def charged(plant: RigPlant, species: str, mol_m3: float, mL: float = 50.0) -> None:
    """Fill the pump of a ``column_rig`` and put a step of ``species`` right at the inlet of its column."""
    contents, layout = plant.contents, plant.layout
    column = contents.species.index(species)
    plant.tell("PU", Action.FILL, mL)
    plant.advance(plant.now_ns + round((mL / 8.0 * 60.0 + 5.0) * S_NS))
    for name in ("PU.syringe1", "PU.out", "COL.in"):
        contents.node_c[layout.node_index[name], column] = mol_m3
    contents.cells[contents.slots(layout.edge_index["L-1"]), column] = mol_m3


OUTLET_S = 4.0


def outlet(plant: RigPlant, species: str, window_s: float = OUTLET_S) -> float:
    """Concentration [mol/m3] of what leaves during the next ``window_s``, from what the flask collects.

    (A node shows the mean of the last part of a step only, which leads by up to half a step.)
    """
    key = f"amount:flask:{species}"
    plant.settle()
    before = plant.truth()
    plant.advance(plant.now_ns + round(window_s * S_NS))
    plant.settle()
    after = plant.truth()
    return (after[key] - before[key]) / (after["volume:flask"] - before["volume:flask"]) * 1e3
