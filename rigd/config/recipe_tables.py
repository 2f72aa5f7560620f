"""The sections of a recipe file, except the sweep."""

from datetime import UTC
from typing import Annotated, Literal

from pydantic import AwareDatetime, Field

from rigd.config.quantity import (
    Delay,
    Duration,
    Flow,
    Fraction,
    Kelvin,
    Pressure,
    Quantity,
    Temperature,
    Volume,
    Written,
)
from rigd.config.table import Count, Flag, Id, IfMissing, NotNegative, Number, Table, Text, Whole
from rigd.model.recipe import (
    ChecklistItem,
    ChemistrySheet,
    Conditioning,
    Flush,
    LeakTest,
    Park,
    Permit,
    Prime,
    Ramp,
    References,
    Switchover,
)

Volumes = Annotated[Number, Field(gt=0, le=1000)]
"""How many times a hold-up volume; a plain number."""


class SheetTable(Table):
    """What a competent person knows about stopping this chemistry; without it only solvent may run."""

    signed_by: Annotated[Text, IfMissing("key-missing", "name the person who answers for these figures")]
    stagnation_safe: Flag
    flush_volumes: Volumes
    safe_temperature: Temperature
    temperature_limit: Temperature
    pressure_limit: Pressure
    adiabatic_rise: Annotated[float, Quantity("temperature difference", "not negative")]
    gas_evolution: Flag
    solvent_compatible: Flag = True
    freezes_below: Temperature = -273.15
    restart_rule: Text = "flush"

    def value(self) -> ChemistrySheet:
        return ChemistrySheet(
            signed_by=self.signed_by,
            stagnation_safe=self.stagnation_safe,
            flush_volumes=self.flush_volumes,
            safe_degC=self.safe_temperature,
            limit_degC=self.temperature_limit,
            limit_bar=self.pressure_limit,
            adiabatic_rise_K=self.adiabatic_rise,
            gas_evolution=self.gas_evolution,
            solvent_compatible=self.solvent_compatible,
            freezes_below_degC=self.freezes_below,
            restart_rule=self.restart_rule,
        )


class PermitTable(Table):
    """What an unattended run needs: who approved it, two people who can be reached, and when it ends.

    ``place`` and ``hazards`` go on the sign for the door, ``shutdown`` (at most three steps) on the shutdown card.
    The run is stopped when nobody could be alerted for ``alerts_down``.
    """

    approved_by: Text
    number: Text
    contacts: Annotated[tuple[Text, ...], Field(min_length=2)]
    end: AwareDatetime
    place: str = ""
    hazards: tuple[Text, ...] = ()
    shutdown: Annotated[tuple[Text, ...], Field(max_length=3)] = ()
    alerts_down: Duration = 600.0

    def value(self) -> Permit:
        end = self.end.astimezone(UTC).isoformat().replace("+00:00", "Z")
        papers = (self.approved_by, self.number, self.contacts, end, self.place, self.hazards, self.shutdown)
        return Permit(*papers, alerts_down_s=self.alerts_down)


class ChecklistTable(Table):
    """Something a person does and signs before the start."""

    id: Id
    text: Text
    reference: str = ""

    def value(self) -> ChecklistItem:
        return ChecklistItem(self.id, self.text, self.reference)


class ReferencesTable(Table):
    """Reference spectra: the mean of so many, of the solvent when conditioning ends, of a liquid that a checklist item
    names when that is signed."""

    spectra: Annotated[int, Field(ge=3, le=100)]

    def value(self) -> References:
        return References(self.spectra)


class PrimeTable(Table):
    """Fast filling of every line with solvent."""

    total_flow: Flow
    volumes: Volumes
    reagent_lines: Flag = True
    reagent_line_volumes: Volumes = 1.5

    def value(self) -> Prime:
        return Prime(self.total_flow, self.volumes, self.reagent_lines, self.reagent_line_volumes)


class ConditioningTable(Table):
    """Solvent at working rate until the bed is swollen and the jacket steady within ``band``."""

    total_flow: Flow
    temperature: Temperature
    volumes: Volumes
    min_time: Delay = 0.0
    max_time: Duration
    band: Kelvin
    steady_for: Duration

    def value(self) -> Conditioning:
        return Conditioning(
            total_mL_min=self.total_flow,
            temperature_degC=self.temperature,
            volumes=self.volumes,
            min_s=self.min_time,
            max_s=self.max_time,
            band_K=self.band,
            steady_s=self.steady_for,
        )


class LeakTestTable(Table):
    """Shut the outlet, raise the pressure, stop, wait, judge the decay. ``shut_position`` "" asks a person to plug."""

    pressure: Pressure
    fill_flow: Flow
    settle_time: Delay
    hold_time: Duration
    largest_drop: Pressure
    fill_time_max: Duration
    shut_position: str = "shut"

    def value(self) -> LeakTest:
        return LeakTest(
            pressure_bar=self.pressure,
            fill_mL_min=self.fill_flow,
            settle_s=self.settle_time,
            hold_s=self.hold_time,
            drop_bar_max=self.largest_drop,
            fill_s_max=self.fill_time_max,
            shut_position=self.shut_position,
        )


class SwitchoverTable(Table):
    """From solvent to reagent."""

    rinses: Annotated[Whole, Field(le=20)]
    stagger: Flag
    total_flow: Flow

    def value(self) -> Switchover:
        return Switchover(self.rinses, self.stagger, self.total_flow)


class SettleTable(Table):
    """When a point is steady. ``tolerance`` is in the unit of the tag ``signal``."""

    volumes: Annotated[NotNegative, Field(le=1000)]
    volumes_max: Volumes
    signal: Text
    tolerance: Written
    persistence: Count
    window: Annotated[Count, Field(ge=3)]
    on_timeout: Literal["collect", "abandon"] = "collect"


class CollectTable(Table):
    """How much of each point goes to the collect position of the outlet valve."""

    volume: Volume
    position: Text = "collect"
    waste_position: Text = "waste"


class FlushTable(Table):
    """Solvent through everything at the end, syringes included."""

    total_flow: Flow
    volumes: Volumes
    temperature: Temperature

    def value(self) -> Flush:
        return Flush(self.total_flow, self.volumes, self.temperature)


class ParkTable(Table):
    """How the rig is left: bath, circulation, and the pressure that counts as none."""

    temperature: Temperature
    circulate: Flag
    pressure_max: Pressure
    max_time: Duration = 600.0

    def value(self) -> Park:
        return Park(self.temperature, self.circulate, self.pressure_max, self.max_time)


class RampTable(Table):
    """Rates after rest: at most ``first`` of the target until ``step_time`` has passed."""

    first: Annotated[Fraction, Field(gt=0, le=1)]
    step_time: Delay

    def value(self) -> Ramp:
        return Ramp(self.first, self.step_time)
