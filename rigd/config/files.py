"""The rig file and the recipe file as wholes."""

from typing import Annotated, Literal

from pydantic import Field

from rigd.config.early_table import EarlyTable
from rigd.config.quantity import Duration, Flow, VolumeOrNone
from rigd.config.recipe_tables import (
    ChecklistTable,
    CollectTable,
    ConditioningTable,
    FlushTable,
    LeakTestTable,
    ParkTable,
    PermitTable,
    PrimeTable,
    RampTable,
    ReferencesTable,
    SettleTable,
    SheetTable,
    SwitchoverTable,
)
from rigd.config.rig_tables import (
    CellTable,
    ChillerTable,
    ColumnTable,
    LineTable,
    LiquidTable,
    PropertiesTable,
    PumpTable,
    RegulatorTable,
    ReliefTable,
    SimulationTable,
    TeeTable,
    ValveTable,
    VesselTable,
)
from rigd.config.rule_tables import (
    AlarmTable,
    DeviceTable,
    InterlockTable,
    LinkTable,
    OutsideTable,
    SensorTable,
)
from rigd.config.sweep_tables import SweepTable
from rigd.config.table import Id, Table, Text


class RigFile(Table):
    """A rig file as a whole. ``flush_flow`` is the total solvent flow of a quench."""

    schema_: Literal["rigd-rig-1"] = Field(alias="schema")
    name: Id
    title: Text
    chemistry: Text
    scan: Annotated[Duration, Field(ge=0.01, le=2.0)] = 0.1
    flush_flow: Flow = 1.0
    liquids: Annotated[tuple[LiquidTable, ...], Field(min_length=1)]
    properties: tuple[PropertiesTable, ...] = ()
    vessels: Annotated[tuple[VesselTable, ...], Field(min_length=1)]
    valves: tuple[ValveTable, ...] = ()
    pumps: Annotated[tuple[PumpTable, ...], Field(min_length=1)]
    tees: tuple[TeeTable, ...] = ()
    columns: tuple[ColumnTable, ...] = ()
    cells: tuple[CellTable, ...] = ()
    regulators: tuple[RegulatorTable, ...] = ()
    reliefs: tuple[ReliefTable, ...] = ()
    chillers: tuple[ChillerTable, ...] = ()
    lines: Annotated[tuple[LineTable, ...], Field(min_length=1)]
    sensors: tuple[SensorTable, ...] = ()
    interlocks: tuple[InterlockTable, ...] = ()
    alarms: tuple[AlarmTable, ...] = ()
    early: EarlyTable = Field(default_factory=EarlyTable)
    links: Annotated[tuple[LinkTable, ...], Field(min_length=1)]
    devices: Annotated[tuple[DeviceTable, ...], Field(min_length=1)]
    outside: OutsideTable = Field(default_factory=OutsideTable)
    simulation: SimulationTable = Field(default_factory=SimulationTable)


class RecipeFile(Table):
    """A recipe file as a whole. Without ``switchover`` no reagent is drawn."""

    schema_: Literal["rigd-recipe-1"] = Field(alias="schema")
    name: Id
    title: Text
    sheet: SheetTable | None = None
    permit: PermitTable | None = None
    checklist: tuple[ChecklistTable, ...] = ()
    prime: PrimeTable | None = None
    conditioning: ConditioningTable | None = None
    references: ReferencesTable | None = None
    leak_test: LeakTestTable | None = None
    switchover: SwitchoverTable | None = None
    sweep: SweepTable | None = None
    settle: SettleTable | None = None
    collect: CollectTable | None = None
    flush: FlushTable
    park: ParkTable
    ramp: RampTable | None = None
    refill_below: dict[Id, VolumeOrNone] = Field(default_factory=dict)
