"""Rigs and recipes for the tests of conduct: the example rig's geometry, built by hand. Invented numbers."""

from __future__ import annotations

from dataclasses import replace

from rigd.model.chemistry import Chemistry, Species
from rigd.model.recipe import (
    ChecklistItem,
    ChemistrySheet,
    Collect,
    Conditioning,
    Flush,
    LeakTest,
    Park,
    Point,
    PointKind,
    Prime,
    Recipe,
    Settle,
    Switchover,
)
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
    RigDefinition,
    Tag,
    TagKind,
    Tee,
    Valve,
    Vessel,
    VesselRole,
)

SECOND_NS = 1_000_000_000


def _line(name: str, start: str, end: str, bore_mm: float, length_mm: float) -> Line:
    def part(text: str) -> End:
        head, _, port = text.partition(".")
        return End(head, port)

    return Line(name, part(start), part(end), bore_mm, length_mm, 70.0)


def _pump(name: str, syringes: int, stroke_mL: float = 5.0) -> Pump:
    return Pump(name, f"dev-{name}", syringes, 10.3, stroke_mL, 0.005, 5.0, 8.0, 20.0, dead_mL=0.02)


def _feed_valve(name: str) -> Valve:
    return Valve(name, f"dev-{name}", ("solvent", "reagent"), "solvent", 1.0, 20.0)


def _feed_lines(letter: str, outlet_mm: float, tee: str) -> tuple[Line, ...]:
    return (
        _line(f"L-S{letter}", "bottle-S", f"V-{letter}.solvent", 1.0, 500),
        _line(f"L-{letter}1", f"bottle-{letter}", f"V-{letter}.reagent", 1.0, 500),
        _line(f"L-{letter}2", f"V-{letter}", f"PU-{letter}", 1.0, 150),
        _line(f"L-{letter}3", f"PU-{letter}", tee, 0.5, outlet_mm),
    )


def _column(name: str) -> Column:
    packing = Packing("invented resin", True, 200.0 / 1000, 0.38, bead_liquid_fraction=0.31, mass_g=1.1)
    return Column(name, 6.6, 100.0, 40.0, packing, jacket="CH")


def _tag(name: str, kind: TagKind, measures: str, unit: str, device: str, period_s: float, at: str = "") -> Tag:
    period_ns = int(period_s * SECOND_NS)
    return Tag(name, name, kind, measures, unit, -50.0, 500.0, device, name, period_ns, 5 * period_ns, at=at)


def _tags(pumps: tuple[Pump, ...], valves: tuple[Valve, ...]) -> tuple[Tag, ...]:
    tags = [
        _tag("PT-1", TagKind.MEASURED, "pressure", "bar", "sensors", 0.2, "TEE"),
        _tag("TT-1", TagKind.MEASURED, "temperature", "degC", "sensors", 1, "COL.middle"),
        _tag("TT-2", TagKind.MEASURED, "temperature", "degC", "sensors", 1, "COL.jacket"),
        _tag("CH.bath", TagKind.FEEDBACK, "temperature", "degC", "chiller", 2, "CH"),
        _tag("CH.setpoint", TagKind.FEEDBACK, "temperature", "degC", "chiller", 2, "CH"),
        _tag("CH.circulating", TagKind.DISCRETE, "state", "1", "chiller", 2, "CH"),
        _tag("IR.conversion", TagKind.DERIVED, "fraction", "1", "ir", 5, "IR"),
    ]
    for pump in pumps:
        for channel in ("flow", "level", "standby", "delivered", "state"):
            tags.append(_tag(f"{pump.id}.{channel}", TagKind.FEEDBACK, channel, "mL", pump.device, 1, pump.id))
    for valve in valves:
        tags.append(_tag(f"{valve.id}.position", TagKind.DISCRETE, "position", "1", valve.device, 1, valve.id))
    return tuple(tags)


def _rig(name: str, letters: str, syringes: int, lines: tuple[Line, ...], columns: tuple[Column, ...]) -> RigDefinition:
    pumps = tuple(_pump(f"PU-{letter}", syringes) for letter in letters)
    valves = (
        *(_feed_valve(f"V-{letter}") for letter in letters),
        Valve("V-OUT", "dev-V-C", ("waste", "collect", "shut"), "waste", 1.0, 20.0),
    )
    return RigDefinition(
        name=name,
        title=name,
        scan_ns=SECOND_NS // 10,
        chemistry=Chemistry("invented", (Species("a", "a", 60.0), Species("p", "p", 88.0)), (), "a", "p"),
        liquids=(
            Liquid("solvent", "ethanol", LiquidRole.SOLVENT, "ethanol", {}),
            *(Liquid(f"feed-{letter}", letter, LiquidRole.REAGENT, "ethanol", {"a": 1.0}) for letter in letters),
        ),
        vessels=(
            Vessel("bottle-S", VesselRole.SUPPLY, 1000.0, 900.0, "solvent"),
            *(Vessel(f"bottle-{letter}", VesselRole.SUPPLY, 250.0, 230.0, f"feed-{letter}") for letter in letters),
            Vessel("flask", VesselRole.COLLECT, 250.0),
            Vessel("waste", VesselRole.WASTE, 2000.0),
        ),
        pumps=pumps,
        valves=valves,
        tees=(Tee("TEE", 0.004, 100.0), Tee("TEE2", 0.004, 100.0)),
        columns=columns,
        cells=(Cell("IR", "ir", 0.04, 25.0, 20.0, 5 * SECOND_NS),),
        regulators=(),
        chillers=(Chiller("CH", "chiller", -10.0, 95.0, 20.0),),
        lines=lines,
        tags=_tags(pumps, valves),
        interlocks=(),
        alarms=(),
        links=(),
        devices=(),
        flush_mL_min=2.0,
    )


_TAIL = (
    _line("L-2", "COL", "IR", 0.5, 250),
    _line("L-3", "IR", "V-OUT", 0.5, 450),
    _line("L-5", "V-OUT.collect", "flask", 0.5, 250),
    _line("L-6", "V-OUT.waste", "waste", 0.5, 250),
)


def two_pumps(syringes: int = 2) -> RigDefinition:
    """Two pumps, one tee, one column, one cell, as the example rig."""
    lines = (
        *_feed_lines("A", 600, "TEE"),
        *_feed_lines("B", 900, "TEE"),
        _line("L-1", "TEE", "COL", 0.5, 300),
        *_TAIL,
    )
    return _rig("two-pumps", "AB", syringes, lines, (_column("COL"),))


def one_pump() -> RigDefinition:
    """One pump straight into the column."""
    return _rig("one-pump", "A", 2, (*_feed_lines("A", 600, "COL"), *_TAIL), (_column("COL"),))


def three_pumps() -> RigDefinition:
    """A and B meet, pass a first column, then C joins before the second."""
    lines = (
        *_feed_lines("A", 600, "TEE"),
        *_feed_lines("B", 900, "TEE"),
        *_feed_lines("C", 400, "TEE2"),
        _line("L-1", "TEE", "COL1", 0.5, 300),
        _line("L-1b", "COL1", "TEE2", 0.5, 200),
        _line("L-1c", "TEE2", "COL", 0.5, 100),
        *_TAIL,
    )
    return _rig("three-pumps", "ABC", 2, lines, (_column("COL1"), _column("COL")))


def sheet(stagnation_safe: bool = True) -> ChemistrySheet:
    """A chemistry sheet of nobody."""
    return ChemistrySheet("nobody", stagnation_safe, 3.0, 20.0, 75.0, 8.0, 3.0, False)


def sweep_point(name: str, total_mL_min: float, pumps: str = "AB", kind: PointKind = PointKind.POINT) -> Point:
    """Equal flows through the named pumps at 60 degC."""
    share = total_mL_min / len(pumps)
    return Point(name, kind, {f"PU-{letter}": share for letter in pumps}, 60.0)


def demo_recipe(points: tuple[Point, ...] | None = None, stagnation_safe: bool = True) -> Recipe:
    """The demonstration sweep, written out."""
    flows = (4.0, 2.9, 2.1, 1.52, 1.1, 0.8)
    return Recipe(
        name="demo",
        title="demo",
        checklist=(ChecklistItem("bed", "The bed has room to swell."), ChecklistItem("vent", "The flask is vented.")),
        prime=Prime(4.0, 1.5),
        conditioning=Conditioning(2.0, 60.0, 2.0, 180.0, 3600.0, 1.0, 60.0),
        leak_test=LeakTest(4.0, 0.4, 20.0, 40.0, 0.3, 180.0),
        switchover=Switchover(1, True, 2.0),
        points=points or tuple(sweep_point(f"P{i + 1}", flow) for i, flow in enumerate(flows)),
        settle=Settle(2.5, 6.0, "IR.conversion", 0.01, 3, 12),
        collect=Collect(0.5),
        flush=Flush(4.0, 3.0, 20.0),
        park=Park(20.0, True, 0.3),
        sheet=sheet(stagnation_safe),
    )


def solvent_recipe() -> Recipe:
    """Solvent only: two flows without a switchover."""
    return replace(demo_recipe(), switchover=None, sheet=None, leak_test=None)
