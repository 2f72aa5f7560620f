"""What can be wrong with a plant, as plain settings. Healthy is the default; faults set them, parts obey them."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(slots=True)
class PumpLever:
    """``stall``: the motor stops. ``slip``: share of the displacement that does not become flow. ``deaf``: orders are
    accepted but not carried out. ``deaf_stop``: only stop is ignored. ``backlash`` [m3] lost after a change-over."""

    stall: bool = False
    slip: float = 0.0
    deaf: bool = False
    deaf_stop: bool = False
    ripple: float = 0.0
    runaway: float = 1.0
    backlash: float = 0.0
    drift_up: float = 0.0
    no_draw: bool = False


@dataclass(slots=True)
class ValveLever:
    """``stuck``: does not move. ``lost``: position unknown. ``liar``: says it moved. ``cross`` [0..1]: leaks
    between ports."""

    stuck: bool = False
    lost: bool = False
    liar: bool = False
    cross: float = 0.0
    slow: float = 1.0


@dataclass(slots=True)
class BathLever:
    """``pump_dead``: no circulation (its status may still say it runs); power factors; ``reset``: counts resets."""

    pump_dead: bool = False
    status_lies: bool = False
    heating: float = 1.0
    cooling: float = 1.0
    resets: int = 0
    full_heat: bool = False
    setpoint_offset: float = 0.0


@dataclass(slots=True)
class SensorLever:
    """How a measured value is spoiled before it is converted; ``open``: broken wire; ``frozen``: code stands still."""

    frozen: bool = False
    offset: float = 0.0
    gain: float = 1.0
    noise: float = 1.0
    is_open: bool = False
    beyond: int = 0
    to_ambient: float = 0.0
    shorted: bool = False
    reversed_sign: bool = False
    spikes: float = 0.0


@dataclass(slots=True)
class CellLever:
    """Spectrum faults: ``offset`` and ``slope`` of the base line [AU], ``film`` [AU at 1000 1/cm], ``dead`` lamp."""

    offset: float = 0.0
    slope: float = 0.0
    film: float = 0.0
    noise: float = 1.0
    bubbles: float = 0.0
    frozen: bool = False
    shift: float = 0.0
    stray: float = 0.0


@dataclass(frozen=True, slots=True)
class DeviceFaults:
    """What a byte server must do wrong for one device; the plant only carries it. ``restarts`` counts up."""

    silent: bool = False
    late_s: float = 0.0
    garbled: float = 0.0
    refuse: bool = False
    pretend: bool = False
    wrong_identity: bool = False
    restarts: int = 0
    echo: bool = False
    chatter: float = 0.0


@dataclass(slots=True)
class Levers:
    """All settings. Edges and nodes by index; parts and devices by id. Factors multiply, so faults combine."""

    flow_factor: dict[int, float] = field(default_factory=dict)  # edge -> conductance factor
    leak: dict[int, float] = field(default_factory=dict)  # node -> conductance to the floor [m3/(s Pa)]
    air: dict[int, float] = field(default_factory=dict)  # node -> gas that enters [m3/s]
    bottle_empty: set[str] = field(default_factory=set)
    closed: dict[str, float] = field(default_factory=dict)  # vessel -> headspace [m3]
    exotherm_W: dict[str, float] = field(default_factory=dict)  # column -> extra heat
    activity: dict[str, float] = field(default_factory=dict)  # column -> factor
    swell: dict[str, float] = field(default_factory=dict)  # column -> voidage factor
    bypass: dict[str, float] = field(default_factory=dict)
    pumps: dict[str, PumpLever] = field(default_factory=dict)
    valves: dict[str, ValveLever] = field(default_factory=dict)
    baths: dict[str, BathLever] = field(default_factory=dict)
    sensors: dict[str, SensorLever] = field(default_factory=dict)
    cells: dict[str, CellLever] = field(default_factory=dict)
    devices: dict[str, DeviceFaults] = field(default_factory=dict)
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
