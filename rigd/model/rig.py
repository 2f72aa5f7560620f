"""The rig: liquids, parts, lines, tags, devices and rules, as one frozen whole made by ``rigd.config``.

The flow path is a graph. A ``Line`` joins two ends; an ``End`` is a part and, for a valve, one of its positions as the
port ("V-A", "solvent"); a valve's common port, and the only port of everything else, is "". Liquid enters a pump,
column or cell by the line that ends there and leaves by the line that starts there.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum

from rigd.model.chemistry import Chemistry
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.protection import Alarm, Interlock


class LiquidRole(StrEnum):
    """What a liquid is for."""

    SOLVENT = "solvent"
    REAGENT = "reagent"


@dataclass(frozen=True, slots=True)
class PropertySet:
    """Properties of one solvent, from a rig file or a library; tuples are at 0, 25 and 60 degC.

    ``source`` says where the numbers come from and is printed beside them; ``swelling_mL_g`` is the settled volume of
    gel beads in it.
    """

    id: str
    density_g_mL: tuple[float, float, float]
    viscosity_mPa_s: tuple[float, float, float]
    vapour_bar: tuple[float, float, float]
    heat_capacity_J_g_K: float
    boiling_degC: float
    source: str
    swelling_mL_g: float = 1.0


@dataclass(frozen=True, slots=True)
class Liquid:
    """A bottle's content. ``properties`` names the property set (density, viscosity, heat) of its main solvent."""

    id: str
    name: str
    role: LiquidRole
    properties: str
    composition_mol_L: Mapping[str, float]


class VesselRole(StrEnum):
    """What a vessel is for."""

    SUPPLY = "supply"
    COLLECT = "collect"
    WASTE = "waste"


@dataclass(frozen=True, slots=True)
class Vessel:
    """Bottle, flask or waste. ``liquid`` is "" unless it supplies one; ``height_mm`` is its level above the bench."""

    id: str
    role: VesselRole
    capacity_mL: float
    content_mL: float = 0.0
    liquid: str = ""
    vented: bool = True
    height_mm: float = 0.0


@dataclass(frozen=True, slots=True)
class Pump:
    """A syringe pump with one syringe (interrupted by refills) or two (alternating, continuous).

    ``dead_mL`` stays behind at the end of a stroke. ``compliance_mL_bar`` is syringe, seal and fittings.
    ``rating_bar`` is the weakest wetted part of the pump; ``screw_pitch_mm`` sets the period of its ripple.
    ``force_limit_N`` is the push at which its motor gives up (0: not stated). ``continuous``: it has no syringes and
    draws all the time; what is said of syringes is then only how it is planned.
    """

    id: str
    device: str
    syringes: int
    bore_mm: float
    stroke_mL: float
    rate_min_mL_min: float
    rate_max_mL_min: float
    refill_rate_mL_min: float
    rating_bar: float
    dead_mL: float = 0.05
    compliance_mL_bar: float = 0.01
    force_limit_N: float = 0.0
    screw_pitch_mm: float = 1.0
    continuous: bool = False

    @property
    def stall_bar(self) -> float:
        """Pressure at which the motor gives up, force over area; 0 when no force limit is stated."""
        return self.force_limit_N / (math.pi / 4.0 * self.bore_mm**2) * 10.0


@dataclass(frozen=True, slots=True)
class Valve:
    """A selector valve. ``rest`` is where it must be without power, link or orders. ``device`` "" = by hand."""

    id: str
    device: str
    positions: tuple[str, ...]
    rest: str
    travel_s: float
    rating_bar: float

    def index(self, position: str) -> int:
        """Index of a position name; raises ``ValueError`` for an unknown one."""
        return self.positions.index(position)


@dataclass(frozen=True, slots=True)
class Tee:
    """A mixing tee or any small volume where lines join."""

    id: str
    volume_mL: float
    rating_bar: float


@dataclass(frozen=True, slots=True)
class Packing:
    """What is in a column. ``voidage`` is of the swollen bed; ``bead_liquid_fraction`` the liquid inside beads.

    ``correlation`` of pressure drop: "ergun", "carman-kozeny", "carman" or "erdim". ``hysteresis`` is the share
    of a compression that stays when the pressure falls again (0 = springs back).

    ``swelling`` = settled volume wet/dry; ``swell_s`` the time constant of swelling after first wetting.
    ``pore_diffusion`` = diffusivity inside a bead over the free one (0.1 to 0.3 in swollen gels: common practice, no
    source); ``retention`` = by species, amount adsorbed per volume of solid over the concentration in the liquid.
    """

    name: str
    catalyst: bool
    bead_diameter_mm: float
    voidage: float
    bead_liquid_fraction: float = 0.0
    mass_g: float = 0.0
    swelling: float = 1.0
    swell_s: float = 300.0
    compressibility_per_bar: float = 0.0
    active_sites_mmol_g: float = 0.0
    correlation: str = "ergun"
    hysteresis: float = 0.5
    pore_diffusion: float = 0.2
    retention: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Column:
    """A packed column, jacketed by the chiller ``jacket`` ("" = at room temperature)."""

    id: str
    bore_mm: float
    length_mm: float
    rating_bar: float
    packing: Packing
    jacket: str = ""
    wall_conductance_W_K: float = 0.5


@dataclass(frozen=True, slots=True)
class Cell:
    """An in-line IR flow cell read by ``device``; ``tags`` it feeds are listed in ``RigDefinition.tags``."""

    id: str
    device: str
    volume_mL: float
    path_um: float
    rating_bar: float
    period_ns: int


@dataclass(frozen=True, slots=True)
class Regulator:
    """A back-pressure regulator in a line."""

    id: str
    set_bar: float
    rating_bar: float


@dataclass(frozen=True, slots=True)
class Relief:
    """A relief valve at the part ``at``. It opens above ``set_bar``, lets out into the vessel ``to`` ("" = floor) and
    shuts again below ``reseat_bar``. ``capacity_mL_min`` passes at the set pressure."""

    id: str
    at: str
    set_bar: float
    reseat_bar: float
    to: str = ""
    capacity_mL_min: float = 20.0


@dataclass(frozen=True, slots=True)
class Chiller:
    """A circulating bath that jackets columns. Its coolant is water unless ``coolant_freezes_degC`` says otherwise."""

    id: str
    device: str
    low_degC: float
    high_degC: float
    safe_degC: float
    bath_mL: float = 3000.0
    heating_W: float = 1000.0
    cooling_W: float = 400.0
    coolant_freezes_degC: float = 0.0


@dataclass(frozen=True, slots=True)
class End:
    """One end of a line: a part and, at a valve, the position that is its port ("" = common)."""

    part: str
    port: str = ""

    def __str__(self) -> str:
        return f"{self.part}.{self.port}" if self.port else self.part


@dataclass(frozen=True, slots=True)
class Line:
    """A tube from one end to the other, in the direction of flow."""

    id: str
    start: End
    end: End
    bore_mm: float
    length_mm: float
    rating_bar: float


class TagKind(StrEnum):
    """Where a tag's value comes from."""

    MEASURED = "measured"
    FEEDBACK = "feedback"
    DERIVED = "derived"
    DISCRETE = "discrete"


@dataclass(frozen=True, slots=True)
class Tag:
    """A named signal. ``at`` is the part where it is measured ("COL.outlet" style ends allowed).

    ``noise`` (one standard deviation), ``wander`` (that of its slow drift to and fro) and ``lag_s`` describe the
    instrument; the simulator uses them, the checks of slopes the noise. ``measures``: pressure, temperature, flow,
    position, volume, concentration, fraction, state.
    """

    id: str
    title: str
    kind: TagKind
    measures: str
    unit: str
    low: float
    high: float
    device: str
    channel: str
    period_ns: int
    stale_ns: int
    at: str = ""
    rating: float = 0.0
    noise: float = 0.0
    lag_s: float = 0.0
    labels: tuple[str, ...] = ()
    wander: float = 0.0


@dataclass(frozen=True, slots=True)
class AlertChannel:
    """Where alerts go: an ``apprise`` URL, or a plain webhook; the URL is a secret and is never logged."""

    name: str
    url: str
    priority_at_least: int = 2


@dataclass(frozen=True, slots=True)
class MqttSpec:
    """A broker for telemetry; all topics start with ``prefix``/``rig name``."""

    host: str
    port: int = 1883
    prefix: str = "rigd"
    username: str = ""
    password_env: str = ""
    keepalive_s: int = 10


@dataclass(frozen=True, slots=True)
class Outside:
    """Who is told: broker and alert channels. Empty is a legal, quiet rig."""

    mqtt: MqttSpec | None = None
    channels: tuple[AlertChannel, ...] = ()


@dataclass(frozen=True, slots=True)
class Simulation:
    """The room (for the simulator and the checks of cold baths), and the truth where it differs from the declared rig.

    ``truth`` maps a path such as "PU-A.compliance_mL_bar" or "COL.voidage" to the true value. ``humidity`` is relative.
    """

    seed: int = 1
    ambient_degC: float = 22.0
    truth: Mapping[str, float] = field(default_factory=dict)
    humidity: float = 0.5


@dataclass(frozen=True, slots=True)
class RigDefinition:
    """The validated whole. ``digest`` is the SHA-256 of the canonical form of the file it came from."""

    name: str
    title: str
    scan_ns: int
    chemistry: Chemistry
    liquids: tuple[Liquid, ...]
    vessels: tuple[Vessel, ...]
    pumps: tuple[Pump, ...]
    valves: tuple[Valve, ...]
    tees: tuple[Tee, ...]
    columns: tuple[Column, ...]
    cells: tuple[Cell, ...]
    regulators: tuple[Regulator, ...]
    chillers: tuple[Chiller, ...]
    lines: tuple[Line, ...]
    tags: tuple[Tag, ...]
    interlocks: tuple[Interlock, ...]
    alarms: tuple[Alarm, ...]
    links: tuple[LinkSpec, ...]
    devices: tuple[DeviceSpec, ...]
    outside: Outside = Outside()
    simulation: Simulation = Simulation()
    flush_mL_min: float = 1.0
    digest: str = ""
    reliefs: tuple[Relief, ...] = ()
    properties: tuple[PropertySet, ...] = ()

    def tag(self, tag_id: str) -> Tag:
        """The tag with this id; ``KeyError`` if there is none."""
        for tag in self.tags:
            if tag.id == tag_id:
                return tag
        raise KeyError(tag_id)
