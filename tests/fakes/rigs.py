"""Rigs of plain values for tests of the core: pumps, feed valves, one column, one bath. Invented numbers."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from rigd.logic.program import Program, RunOptions, compile_program
from rigd.model.chemistry import Chemistry
from rigd.model.devices import ChannelSpec, DeviceSpec, LinkSpec, PumpState
from rigd.model.orders import Stop
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, Priority
from rigd.model.recipe import ChemistrySheet, Collect, Flush, Park, Recipe, Settle
from rigd.model.rig import (
    Chiller,
    Column,
    End,
    Line,
    Liquid,
    LiquidRole,
    Packing,
    Pump,
    RigDefinition,
    Tag,
    TagKind,
    Tee,
    Valve,
    Vessel,
    VesselRole,
)

S = 1_000_000_000
MS = 1_000_000

PRESSURE_HIGH = Interlock(
    "PRESSURE-HIGH",
    "Pressure in the wetted path high-high",
    (Condition(ConditionKind.HIGH, "PT-1", 8.0), Condition(ConditionKind.HIGH, "PT-2", 8.0)),
    Stop.CUT,
    on_delay_ns=200 * MS,
    response="Find the block.",
)
BED_HOT = Interlock(
    "BED-HOT",
    "Bed temperature high-high",
    (Condition(ConditionKind.HIGH, "TT-1", 75.0),),
    Stop.QUENCH,
    on_delay_ns=2 * S,
)
PRESSURE_RISING = Alarm(
    "PRESSURE-RISING",
    "Column pressure near its limit",
    Condition(ConditionKind.HIGH, "PT-1", 6.5, deadband=0.4),
    Priority.HIGH,
    "Lower the flow.",
    on_delay_ns=1 * S,
    off_delay_ns=15 * S,
)
FLASK_FULL = Alarm(
    "FLASK-FULL",
    "Collection flask nearly full",
    Condition(ConditionKind.HIGH, "flask.volume", 225.0, deadband=5.0),
    Priority.MEDIUM,
    "Exchange the flask.",
)

_PUMP_UNITS = {"flow": "mL/min", "level": "mL", "standby": "mL", "delivered": "mL", "state": ""}
_BATH_UNITS = {"bath": "degC", "setpoint": "degC", "circulating": ""}


def sensor(tag: str, measures: str, unit: str, low: float, high: float, period_ns: int, stale_ns: int) -> Tag:
    """A measured tag of the device ``sensors``; its channel has the tag's name."""
    return Tag(tag, tag, TagKind.MEASURED, measures, unit, low, high, "sensors", tag, period_ns, stale_ns)


SENSORS = (
    sensor("PT-1", "pressure", "bar", 0.0, 25.0, 200 * MS, 1 * S),
    sensor("PT-2", "pressure", "bar", 0.0, 25.0, 200 * MS, 1 * S),
    sensor("TT-1", "temperature", "degC", -50.0, 150.0, 1 * S, 5 * S),
    sensor("TT-2", "temperature", "degC", -50.0, 150.0, 1 * S, 5 * S),
)


def two_pump_rig(
    *,
    syringes: Sequence[int] = (2, 2),
    interlocks: Sequence[Interlock] = (PRESSURE_HIGH, BED_HOT),
    alarms: Sequence[Alarm] = (PRESSURE_RISING, FLASK_FULL),
    sensors: Sequence[Tag] = SENSORS,
) -> RigDefinition:
    """PU-A, PU-B ... behind V-A, V-B ... into a tee, a column in the bath CH, and V-C to waste or flask."""
    letters = "ABDEFG"[: len(syringes)]
    pumps = tuple(
        Pump(f"PU-{x}", f"pump-{x}", n, 10.3, 5.0, 0.005, 5.0, 8.0, 20.0, dead_mL=0.02)
        for x, n in zip(letters, syringes, strict=True)
    )
    feeds = tuple(Valve(f"V-{x}", f"valve-{x}", ("solvent", "reagent"), "solvent", 1.0, 20.0) for x in letters)
    outlet = Valve("V-C", "valve-C", ("waste", "collect", "shut"), "waste", 1.0, 20.0)
    valves = (*feeds, outlet)
    units = (*pumps, *valves, Chiller("CH", "chiller", -10.0, 95.0, 20.0))
    tags = [*sensors, *(tag for unit in units for tag in _unit_tags(unit))]
    tags += [Tag("flask.volume", "flask", TagKind.DERIVED, "volume", "mL", 0, 250, "", "", S, 0)]
    devices = tuple(_device(unit.device, unit.id, tags) for unit in units)
    return RigDefinition(
        name="two-pump",
        title="two pumps, one column",
        scan_ns=100 * MS,
        chemistry=Chemistry("nothing", (), (), "", ""),
        liquids=(
            Liquid("solvent", "solvent", LiquidRole.SOLVENT, "ethanol", {}),
            *(Liquid(f"feed-{x}", f"feed {x}", LiquidRole.REAGENT, "ethanol", {}) for x in letters),
        ),
        vessels=(
            Vessel("bottle-S", VesselRole.SUPPLY, 1000.0, 900.0, "solvent"),
            *(Vessel(f"bottle-{x}", VesselRole.SUPPLY, 250.0, 230.0, f"feed-{x}") for x in letters),
            Vessel("flask", VesselRole.COLLECT, 250.0),
            Vessel("waste", VesselRole.WASTE, 2000.0),
        ),
        pumps=pumps,
        valves=valves,
        tees=(Tee("TEE", 0.004, 100.0),),
        columns=(Column("COL", 6.6, 100.0, 40.0, Packing("resin", True, 0.2, 0.38, 0.31), "CH"),),
        cells=(),
        regulators=(),
        chillers=(Chiller("CH", "chiller", -10.0, 95.0, 20.0),),
        lines=_lines(letters),
        tags=tuple(tags),
        interlocks=(*interlocks, *_built_in(pumps, valves, devices)),
        alarms=(*alarms, *(_empty(pump) for pump in pumps)),
        links=(LinkSpec("bus", "simulated"),),
        devices=(*devices, _device("sensors", "", tags)),
        flush_mL_min=2.0,
    )


def small_recipe(*, sheet: ChemistrySheet | None = None) -> Recipe:
    """A recipe without points, for tests of protect."""
    return Recipe(
        name="nothing",
        title="nothing",
        checklist=(),
        prime=None,
        conditioning=None,
        leak_test=None,
        switchover=None,
        points=(),
        settle=Settle(2.5, 6.0, "PT-1", 0.01, 3, 12),
        collect=Collect(0.5),
        flush=Flush(4.0, 3.0, 20.0),
        park=Park(20.0, True, 0.3),
        sheet=sheet,
    )


def program_of(rig: RigDefinition | None = None, **options: object) -> Program:
    """The compiled program of a rig and the small recipe."""
    return compile_program(rig or two_pump_rig(), small_recipe(), replace(RunOptions(), **options))


def _unit_tags(unit: Pump | Valve | Chiller) -> list[Tag]:
    if isinstance(unit, Pump):
        labels = {"state": tuple(state.name.lower() for state in PumpState)}
        return [_feedback(unit, c, u, S, labels.get(c, ())) for c, u in _PUMP_UNITS.items()]
    if isinstance(unit, Valve):
        return [_feedback(unit, "position", "", S, unit.positions)]
    return [_feedback(unit, channel, text, 2 * S, ()) for channel, text in _BATH_UNITS.items()]


def _feedback(unit: Pump | Valve | Chiller, channel: str, text: str, period_ns: int, labels: tuple[str, ...]) -> Tag:
    name, device = f"{unit.id}.{channel}", unit.device
    stale_ns = 5 * period_ns
    return Tag(
        name, name, TagKind.FEEDBACK, channel, text, -1e3, 1e6, device, channel, period_ns, stale_ns, labels=labels
    )


def _device(device: str, unit: str, tags: Sequence[Tag]) -> DeviceSpec:
    channels = tuple(ChannelSpec(tag.channel, tag.id, tag.period_ns) for tag in tags if tag.device == device)
    return DeviceSpec(device, "none", "none", "bus", "1", unit, channels)


def _built_in(pumps: Sequence[Pump], valves: Sequence[Valve], devices: Sequence[DeviceSpec]) -> list[Interlock]:
    def one(name: str, condition: Condition, on_delay_ns: int = 0) -> Interlock:
        return Interlock(name, name, (condition,), Stop.CUT, on_delay_ns=on_delay_ns, built_in=True)

    stalled = float(PumpState.STALLED)
    found = [one(f"LINK-{device.id}", Condition(ConditionKind.LINK, device.id)) for device in devices]
    found += [one(f"POWER-{device.id}", Condition(ConditionKind.POWER_CYCLED, device.id)) for device in devices]
    found += [one(f"STALL-{pump.id}", Condition(ConditionKind.EQUALS, f"{pump.id}.state", stalled)) for pump in pumps]
    return found + [
        one(f"MISMATCH-{valve.id}", Condition(ConditionKind.MISMATCH, f"{valve.id}.position"), S) for valve in valves
    ]


def _empty(pump: Pump) -> Alarm:
    condition = Condition(ConditionKind.EQUALS, f"{pump.id}.state", float(PumpState.EMPTY))
    return Alarm(f"EMPTY-{pump.id}", f"{pump.id} is empty", condition, Priority.HIGH, "Refill it.", hold=True)


def _lines(letters: str) -> tuple[Line, ...]:
    def line(name: str, start: str, end: str, bore_mm: float, length_mm: float) -> Line:
        return Line(name, End(*start.split(".")), End(*end.split(".")), bore_mm, length_mm, 70.0)

    feeds = [
        part
        for x in letters
        for part in (
            line(f"L-S{x}", "bottle-S", f"V-{x}.solvent", 1.0, 500),
            line(f"L-{x}1", f"bottle-{x}", f"V-{x}.reagent", 1.0, 500),
            line(f"L-{x}2", f"V-{x}", f"PU-{x}", 1.0, 150),
            line(f"L-{x}3", f"PU-{x}", "TEE", 0.5, 600),
        )
    ]
    return (
        *feeds,
        line("L-1", "TEE", "COL", 0.5, 300),
        line("L-2", "COL", "V-C", 0.5, 300),
        line("L-3", "V-C.collect", "flask", 0.5, 250),
        line("L-4", "V-C.waste", "waste", 0.5, 250),
    )
