"""The parts of a rig file: liquids, vessels, valves, pumps, tees, columns, cells, regulators, chillers, lines."""

import math
from typing import Annotated, Literal

from pydantic import Field

from rigd.config.quantity import (
    Duration,
    Flow,
    Fraction,
    Length,
    Mass,
    Pressure,
    Quantity,
    Temperature,
    Volume,
    VolumeOrNone,
)
from rigd.config.table import Flag, Id, Name, NotNegative, Number, Table, Text, ns
from rigd.model.rig import (
    Cell,
    Chiller,
    Column,
    End,
    Line,
    Liquid,
    LiquidRole,
    Packing,
    PropertySet,
    Pump,
    Regulator,
    Relief,
    Tee,
    Valve,
    Vessel,
    VesselRole,
)

EndText = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_-]*(\.[A-Za-z0-9_-]+)?$")]
"""One end of a line: a part, or a valve and its position: ``V-A.solvent``."""
Concentration = Annotated[float, Quantity("amount concentration", "not negative")]


def end_of(text: str) -> End:
    """``"V-A.solvent"`` as an end."""
    part, _, port = text.partition(".")
    return End(part, port)


Density = Annotated[float, Quantity("density", "positive")]
Viscosity = Annotated[float, Quantity("viscosity", "positive")]


class PropertiesTable(Table):
    """A user's own property set of a solvent, at 0, 25 and 60 degC, with where the numbers come from."""

    id: Name
    density: Annotated[tuple[Density, ...], Field(min_length=3, max_length=3)]
    viscosity: Annotated[tuple[Viscosity, ...], Field(min_length=3, max_length=3)]
    vapour_pressure: Annotated[tuple[Pressure, ...], Field(min_length=3, max_length=3)]
    heat_capacity: Annotated[float, Quantity("specific heat", "positive")]
    boiling: Temperature
    swelling: Annotated[Fraction, Field(gt=0, le=20)] = 1.0
    source: Text

    def value(self) -> PropertySet:
        rows = (self.density, self.viscosity, self.vapour_pressure)
        density, viscosity, vapour = ((row[0], row[1], row[2]) for row in rows)
        return PropertySet(
            self.id, density, viscosity, vapour, self.heat_capacity, self.boiling, self.source, self.swelling
        )


class LiquidTable(Table):
    """What a bottle holds. ``properties`` names the property set (density, viscosity, heat) of its main solvent."""

    id: Id
    name: Text
    role: LiquidRole
    properties: Name
    composition: Annotated[dict[Name, Concentration], Field(min_length=1)]

    def value(self) -> Liquid:
        return Liquid(self.id, self.name, self.role, self.properties, self.composition)


class VesselTable(Table):
    """A bottle, flask or waste; one that supplies names its liquid and content."""

    id: Id
    role: VesselRole
    capacity: Volume
    content: VolumeOrNone = 0.0
    liquid: str = ""
    vented: Flag = True
    height: Annotated[float, Quantity("length")] = 0.0

    def value(self) -> Vessel:
        return Vessel(self.id, self.role, self.capacity, self.content, self.liquid, self.vented, self.height)


class ValveTable(Table):
    """A selector valve. Without ``device`` a person turns it. ``rest`` is its position without power or orders."""

    id: Id
    device: str = ""
    positions: Annotated[tuple[Annotated[str, Field(pattern=r"^[A-Za-z0-9_-]+$")], ...], Field(min_length=2)]
    rest: str
    travel_time: Duration
    rating: Pressure

    def value(self) -> Valve:
        return Valve(self.id, self.device, self.positions, self.rest, self.travel_time, self.rating)


VIRTUAL_BORE_MM = 20.0


class PumpTable(Table):
    """A pump with one or two syringes, or with none (``syringes = 0``: piston, gear and other pumps that draw all the
    time). ``rating`` is its weakest wetted part.

    A pump without syringes needs no ``bore``, ``stroke_volume`` and ``refill_rate``: it is planned and rehearsed as one
    that holds five minutes of its largest rate in each of two and draws twenty times as fast. ``pressure_limit`` says
    at which pressure it gives up, where no ``force_limit`` is stated.
    """

    id: Id
    device: Id
    syringes: Annotated[int, Field(strict=True, ge=0, le=2)]
    bore: Length | None = None
    stroke_volume: Volume | None = None
    dead_volume: VolumeOrNone = 0.05
    rate_min: Flow
    rate_max: Flow
    refill_rate: Flow | None = None
    rating: Pressure
    compliance: Annotated[float, Quantity("compliance", "positive")] = 0.01
    screw_pitch: Length = 1.0
    force_limit: Annotated[float, Quantity("force", "not negative")] = 0.0
    pressure_limit: Pressure | None = None

    @property
    def missing(self) -> tuple[str, ...]:
        """Keys that a pump with syringes needs and does not have."""
        return tuple(
            key for key in ("bore", "stroke_volume", "refill_rate") if self.syringes and not getattr(self, key)
        )

    def value(self) -> Pump:
        bore_mm = self.bore or VIRTUAL_BORE_MM
        force_N = self.force_limit
        if self.pressure_limit is not None and not force_N:
            force_N = self.pressure_limit / 10.0 * math.pi / 4.0 * bore_mm**2  # 1 bar is 0.1 N/mm2
        return Pump(
            id=self.id,
            device=self.device,
            syringes=self.syringes or 2,
            bore_mm=bore_mm,
            stroke_mL=self.stroke_volume or max(10.0, 5.0 * self.rate_max),
            rate_min_mL_min=self.rate_min,
            rate_max_mL_min=self.rate_max,
            refill_rate_mL_min=self.refill_rate or 20.0 * self.rate_max,
            rating_bar=self.rating,
            dead_mL=self.dead_volume,
            compliance_mL_bar=self.compliance,
            screw_pitch_mm=self.screw_pitch,
            force_limit_N=force_N,
            continuous=self.syringes == 0,
        )


class TeeTable(Table):
    """A mixing tee, or any small volume where lines join."""

    id: Id
    volume: Volume
    rating: Pressure

    def value(self) -> Tee:
        return Tee(self.id, self.volume, self.rating)


class PackingTable(Table):
    """What is in a column. ``voidage`` is of the swollen bed; ``bead_liquid`` the liquid fraction inside beads.

    ``pore_diffusion``: diffusivity inside a bead over the free one. ``retention``: by species, amount adsorbed per
    volume of solid over the concentration in the liquid (linear isotherm); only the simulator uses both.
    """

    name: Text
    catalyst: Flag
    bead_diameter: Length
    voidage: Annotated[Fraction, Field(gt=0, lt=1)]
    bead_liquid: Annotated[Fraction, Field(lt=1)] = 0.0
    mass: Mass = 0.0
    swelling: Annotated[Fraction, Field(ge=1, le=20)] = 1.0
    swell_time: Duration = 300.0
    compressibility: Annotated[float, Quantity("compressibility", "not negative")] = 0.0
    active_sites: Annotated[float, Quantity("site density", "not negative")] = 0.0
    correlation: Literal["ergun", "carman-kozeny", "carman", "erdim"] = "ergun"
    hysteresis: Fraction = 0.5
    pore_diffusion: Annotated[Fraction, Field(gt=0, le=1)] = 0.2
    retention: dict[Name, NotNegative] = Field(default_factory=dict)

    def value(self) -> Packing:
        return Packing(
            name=self.name,
            catalyst=self.catalyst,
            bead_diameter_mm=self.bead_diameter,
            voidage=self.voidage,
            bead_liquid_fraction=self.bead_liquid,
            mass_g=self.mass,
            swelling=self.swelling,
            swell_s=self.swell_time,
            compressibility_per_bar=self.compressibility,
            active_sites_mmol_g=self.active_sites,
            correlation=self.correlation,
            hysteresis=self.hysteresis,
            pore_diffusion=self.pore_diffusion,
            retention=self.retention,
        )


class ColumnTable(Table):
    """A packed column, jacketed by the chiller ``jacket`` ("" = at room temperature)."""

    id: Id
    bore: Length
    length: Length
    rating: Pressure
    packing: PackingTable
    jacket: str = ""
    wall_conductance: Annotated[float, Quantity("heat conductance", "positive")] = 0.5

    def value(self) -> Column:
        packing = self.packing.value()
        return Column(self.id, self.bore, self.length, self.rating, packing, self.jacket, self.wall_conductance)


class CellTable(Table):
    """An in-line IR flow cell; ``period`` is the time of one spectrum."""

    id: Id
    device: Id
    volume: Volume
    path_length: Length
    rating: Pressure
    period: Duration

    def value(self) -> Cell:
        return Cell(self.id, self.device, self.volume, self.path_length * 1000.0, self.rating, ns(self.period))


class RegulatorTable(Table):
    """A back-pressure regulator in a line."""

    id: Id
    set_pressure: Pressure
    rating: Pressure

    def value(self) -> Regulator:
        return Regulator(self.id, self.set_pressure, self.rating)


class ReliefTable(Table):
    """A relief valve at a part. It lets out into the vessel ``to`` ("" = floor), ``capacity`` at its set pressure.

    Without ``reseat_pressure`` it shuts at nine tenths of the set pressure (common practice, no source).
    """

    id: Id
    at: Text
    set_pressure: Pressure
    reseat_pressure: Pressure | None = None
    to: str = ""
    capacity: Flow = 20.0

    def value(self) -> Relief:
        reseat = 0.9 * self.set_pressure if self.reseat_pressure is None else self.reseat_pressure
        return Relief(self.id, self.at, self.set_pressure, reseat, self.to, self.capacity)


class ChillerTable(Table):
    """A circulating bath. ``safe_temperature`` is where it goes when the rig is stopped.

    ``coolant_freezes`` is the freezing point of what is in it (0 degC: water)."""

    id: Id
    device: Id
    range: tuple[Temperature, Temperature]
    safe_temperature: Temperature
    bath_volume: Volume = 3000.0
    heating: Annotated[float, Quantity("power", "not negative")] = 1000.0
    cooling: Annotated[float, Quantity("power", "not negative")] = 400.0
    coolant_freezes: Temperature = 0.0

    def value(self) -> Chiller:
        low, high = self.range
        return Chiller(
            self.id, self.device, low, high, self.safe_temperature, self.bath_volume, self.heating, self.cooling,
            self.coolant_freezes,
        )  # fmt: skip


class LineTable(Table):
    """A tube, in the direction of flow: from a part to a part."""

    id: Id
    from_: EndText = Field(alias="from")
    to: EndText
    bore: Length
    length: Length
    rating: Pressure

    def value(self) -> Line:
        return Line(self.id, end_of(self.from_), end_of(self.to), self.bore, self.length, self.rating)


class SimulationTable(Table):
    """The room, and where the true rig differs for the simulator: ``truth``, such as ``"COL.voidage" = 0.385``.

    ``ambient`` and ``humidity`` (relative) also tell the checks when water condenses on a cold bath.
    """

    seed: Annotated[int, Field(strict=True, ge=0)] = 1
    ambient: Temperature = 22.0
    humidity: Annotated[Fraction, Field(gt=0, le=1)] = 0.5
    truth: dict[str, Number] = Field(default_factory=dict)
