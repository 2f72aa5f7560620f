"""What can be wrong with a plant, as plain settings. Healthy is the default; faults set them, parts obey them."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(slots=True)
class PumpLever:
    """``gain``: true over counted displacement. ``deaf`` accepts orders and does nothing; ``deaf_stop`` only for stop.

    ``ripple`` is the depth of the screw's periodic error; ``slack`` [m3] is lost after a change-over or refill;
    ``no_draw``: filling counts but draws nothing; ``air_share`` of what is drawn is air.
    """

    stall: bool = False
    gain: float = 1.0
    deaf: bool = False
    deaf_stop: bool = False
    ripple: float = 0.0
    slack: float = 0.0
    no_draw: bool = False
    air_share: float = 0.0


@dataclass(slots=True)
class ValveLever:
    """``stuck``: does not move. ``lost``: position unknown. ``liar``: says it moved. ``slow``: factor on travel."""

    stuck: bool = False
    lost: bool = False
    liar: bool = False
    cross: float = 0.0
    slow: float = 1.0


@dataclass(slots=True)
class BathLever:
    """``pump_dead``: no circulation, ``status_lies`` although it says so. Power factors; ``full_heat``: relay stuck."""

    pump_dead: bool = False
    status_lies: bool = False
    heating: float = 1.0
    cooling: float = 1.0
    full_heat: bool = False
    offset_K: float = 0.0


@dataclass(slots=True)
class SensorLever:
    """How a measured value is spoiled: ``beyond`` +1/-1 leaves the converter; ``loose`` 0..1 towards the room."""

    frozen: bool = False
    offset: float = 0.0
    gain: float = 1.0
    noise: float = 1.0
    is_open: bool = False
    beyond: int = 0
    loose: float = 0.0
    mirrored: bool = False
    spikes: float = 0.0


@dataclass(slots=True)
class CellLever:
    """Spectrum faults: base line ``offset`` and ``slope`` [AU], ``film`` [AU], ``stray`` light share, ``shift``
    [1/cm]."""

    offset: float = 0.0
    slope: float = 0.0
    film: float = 0.0
    noise: float = 1.0
    frozen: bool = False
    shift: float = 0.0
    stray: float = 0.0


@dataclass(slots=True)
class Levers:
    """All settings. Edges and nodes by index; parts, tags and devices by id. Factors multiply, so faults combine."""

    flow_factor: dict[int, float] = field(default_factory=dict)  # edge -> conductance factor
    conductance: dict[int, float] = field(default_factory=dict)  # leak or shunt edge -> conductance [m3/(s Pa)]
    air: dict[int, float] = field(default_factory=dict)  # node -> gas that enters [m3/s]
    head_Pa: dict[str, float] = field(default_factory=dict)  # vessel -> pressure of its height
    bottle_empty: set[str] = field(default_factory=set)
    closed: set[str] = field(default_factory=set)  # vessels without a vent
    capacity: dict[str, float] = field(default_factory=dict)  # vessel -> true capacity [m3]
    exotherm_W: dict[str, float] = field(default_factory=dict)  # column -> extra heat
    activity: dict[str, float] = field(default_factory=dict)  # column -> factor
    pumps: dict[str, PumpLever] = field(default_factory=dict)
    valves: dict[str, ValveLever] = field(default_factory=dict)
    baths: dict[str, BathLever] = field(default_factory=dict)
    sensors: dict[str, SensorLever] = field(default_factory=dict)
    cells: dict[str, CellLever] = field(default_factory=dict)
    silent: set[str] = field(default_factory=set)  # devices that do not answer
    refusing: set[str] = field(default_factory=set)  # units that refuse every order
    restarted: set[str] = field(default_factory=set)  # units that lost power once
    room_K: float = 0.0

    def pump(self, unit: str) -> PumpLever:
        """Settings of a pump, made on first use."""
        return self.pumps.setdefault(unit, PumpLever())

    def valve(self, unit: str) -> ValveLever:
        """Settings of a valve."""
        return self.valves.setdefault(unit, ValveLever())

    def bath(self, unit: str) -> BathLever:
        """Settings of a chiller."""
        return self.baths.setdefault(unit, BathLever())

    def sensor(self, tag: str) -> SensorLever:
        """Settings of a sensor."""
        return self.sensors.setdefault(tag, SensorLever())

    def cell(self, cell: str) -> CellLever:
        """Settings of an IR cell."""
        return self.cells.setdefault(cell, CellLever())
