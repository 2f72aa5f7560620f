"""The work: what the sequence does between the first signature and the parked rig."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum


@dataclass(frozen=True, slots=True)
class ChecklistItem:
    """Something a person does and signs before the start. ``reference``: the liquid that is in the cell by then."""

    id: str
    text: str
    reference: str = ""


@dataclass(frozen=True, slots=True)
class References:
    """Reference spectra: the mean of the last ``spectra`` ones, of solvent when conditioning ends, of a feed when the
    checklist item that names it is signed."""

    spectra: int


@dataclass(frozen=True, slots=True)
class ChemistrySheet:
    """What a competent person knows about stopping this chemistry; without it only solvent may run."""

    signed_by: str
    stagnation_safe: bool
    flush_volumes: float
    safe_degC: float
    limit_degC: float
    limit_bar: float
    adiabatic_rise_K: float
    gas_evolution: bool
    solvent_compatible: bool = True
    freezes_below_degC: float = -273.15
    restart_rule: str = "flush"


@dataclass(frozen=True, slots=True)
class Permit:
    """What an unattended run needs on paper. ``place``, ``hazards`` and ``shutdown`` (steps) are for who comes by.

    ``alerts_down_s``: how long the run may go on while nobody can be alerted (600 s: proposal, no source).
    """

    approved_by: str
    number: str
    contacts: tuple[str, ...]
    end_utc: str
    place: str = ""
    hazards: tuple[str, ...] = ()
    shutdown: tuple[str, ...] = ()
    alerts_down_s: float = 600.0


@dataclass(frozen=True, slots=True)
class Prime:
    """Fast filling of every line with solvent at ``total_mL_min`` for ``volumes`` times each line's hold-up."""

    total_mL_min: float
    volumes: float
    reagent_lines: bool = True
    reagent_line_volumes: float = 1.5


@dataclass(frozen=True, slots=True)
class Conditioning:
    """Solvent at working rate until the bed is swollen and the jacket within ``band_K`` for ``steady_s``."""

    total_mL_min: float
    temperature_degC: float
    volumes: float
    min_s: float
    max_s: float
    band_K: float
    steady_s: float


@dataclass(frozen=True, slots=True)
class LeakTest:
    """Shut the outlet, raise to ``pressure_bar`` at ``fill_mL_min``, stop, wait, judge the decay.

    The rig needs an outlet valve position named ``shut_position``; "" asks a person to plug and unplug the outlet.
    """

    pressure_bar: float
    fill_mL_min: float
    settle_s: float
    hold_s: float
    drop_bar_max: float
    fill_s_max: float
    shut_position: str = "shut"


@dataclass(frozen=True, slots=True)
class Switchover:
    """From solvent to reagent: ``rinses`` of each syringe; ``stagger`` times the valves so that fronts meet."""

    rinses: int
    stagger: bool
    total_mL_min: float


class PointKind(StrEnum):
    """A sweep point, a return to an earlier one (to expose deactivation), or a solvent blank."""

    POINT = "point"
    RETURN = "return"
    BLANK = "blank"


@dataclass(frozen=True, slots=True)
class Point:
    """One condition. ``flows_mL_min`` per pump; ``of`` is the repeated point for a return."""

    id: str
    kind: PointKind
    flows_mL_min: Mapping[str, float]
    temperature_degC: float
    of: str = ""

    @property
    def total_mL_min(self) -> float:
        """Sum of the flows."""
        return sum(self.flows_mL_min.values())


@dataclass(frozen=True, slots=True)
class Settle:
    """When a point is steady: ``volumes`` of the wetted path after the front AND the signal quiet.

    ``signal`` is a tag; quiet means that the change projected over the collection is shown to be below ``tolerance``
    (tag unit) and the ratio test accepts, for ``persistence`` samples in a row. After ``volumes_max`` the point is
    collected as "unsettled" or abandoned, as ``on_timeout`` says.
    """

    volumes: float
    volumes_max: float
    signal: str
    tolerance: float
    persistence: int
    window: int
    on_timeout: str = "collect"


@dataclass(frozen=True, slots=True)
class Collect:
    """``volume_mL`` into the collect position, after the dead volume to the outlet valve has passed."""

    volume_mL: float
    position: str = "collect"
    waste_position: str = "waste"


@dataclass(frozen=True, slots=True)
class Flush:
    """Solvent through everything, syringes included, then depressurise."""

    total_mL_min: float
    volumes: float
    temperature_degC: float


@dataclass(frozen=True, slots=True)
class Park:
    """How the rig is left: bath temperature, circulation, and the pressure that counts as none."""

    temperature_degC: float
    circulate: bool
    pressure_bar_max: float
    max_s: float = 600.0


@dataclass(frozen=True, slots=True)
class Ramp:
    """Rates after rest: at most ``fraction_first`` of the target until ``step_s`` have passed."""

    fraction_first: float = 1.0
    step_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Recipe:
    """The whole, with the points already expanded and ordered. ``solvent_only`` recipes never touch reagent."""

    name: str
    title: str
    checklist: tuple[ChecklistItem, ...]
    prime: Prime | None
    conditioning: Conditioning | None
    leak_test: LeakTest | None
    switchover: Switchover | None
    points: tuple[Point, ...]
    settle: Settle
    collect: Collect
    flush: Flush
    park: Park
    ramp: Ramp = Ramp()
    sheet: ChemistrySheet | None = None
    permit: Permit | None = None
    refill_below_mL: Mapping[str, float] = field(default_factory=dict)
    seed: int = 0
    digest: str = ""
    references: References | None = None

    @property
    def solvent_only(self) -> bool:
        """True when no phase draws reagent."""
        return self.switchover is None
