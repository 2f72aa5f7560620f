"""Tags that no person writes: what every pump, valve, chiller, cell and vessel tells, and which device reads it."""

from __future__ import annotations

from collections.abc import Mapping

from rigd.config.rule_tables import DIMENSION_OF, DeviceTable, SensorTable
from rigd.config.table import ns
from rigd.model.chemistry import Chemistry
from rigd.model.devices import (
    CHILLER_CHANNELS,
    PUMP_CHANNELS,
    VALVE_CHANNELS,
    VALVE_LOST,
    ChannelSpec,
    PumpState,
)
from rigd.model.rig import Cell, Chiller, Liquid, Pump, Tag, TagKind, Valve, Vessel
from rigd.model.units import HOUSE

_DEFAULT_DEVICE_S = 1.0
_LEDGER_S = 1.0
STALE_PERIODS = 5


class Timing:
    """Periods and ages of a device's channels; the defaults for a device that the file does not (rightly) declare."""

    def __init__(self, devices: Mapping[str, DeviceTable]) -> None:
        self._devices = devices

    def of(self, device: str) -> tuple[int, int]:
        """Period and age limit [ns]."""
        table = self._devices.get(device)
        if table is None:
            return ns(_DEFAULT_DEVICE_S), ns(STALE_PERIODS * _DEFAULT_DEVICE_S)
        return table.period_ns, table.stale_ns


def sensor_tag(sensor: SensorTable, timing: Timing, rating: float) -> Tag:
    """The tag of a sensor; period and age are the device's unless it states its own."""
    low, high = sensor.limits
    device_ns, device_stale_ns = timing.of(sensor.device)
    period_ns = device_ns if sensor.period is None else ns(sensor.period)
    stale_ns = device_stale_ns if sensor.period is None else STALE_PERIODS * period_ns
    state = sensor.measures == "state"
    return Tag(
        id=sensor.tag,
        title=sensor.title,
        kind=TagKind.DISCRETE if state else TagKind.MEASURED,
        measures=sensor.measures,
        unit="" if state else HOUSE[DIMENSION_OF[sensor.measures]],
        low=low,
        high=high,
        device=sensor.device,
        channel=sensor.channel,
        period_ns=period_ns,
        stale_ns=stale_ns if sensor.stale_after is None else ns(sensor.stale_after),
        at=sensor.at,
        rating=rating,
        noise=sensor.noise_house,
        lag_s=sensor.lag,
        labels=sensor.labels,
        wander=sensor.wander_house,
    )


def pump_tags(pump: Pump, timing: Timing) -> tuple[Tag, ...]:
    """Flow, levels, delivered volume and state."""
    fastest = max(pump.rate_max_mL_min, pump.refill_rate_mL_min)
    states = tuple(state.name.lower() for state in PumpState)
    told = {
        "flow": ("flow delivered", "flow", "mL/min", -fastest, fastest),
        "level": ("liquid left in the active syringe", "volume", "mL", 0.0, pump.stroke_mL),
        "standby": ("liquid ready in the other syringe", "volume", "mL", 0.0, pump.stroke_mL),
        "delivered": ("delivered since power-on", "volume", "mL", 0.0, 1e9),
        "state": ("state", "state", "", 0.0, float(len(states) - 1)),
    }
    labels = {"state": states}
    return _unit_tags(pump.id, pump.device, {name: told[name] for name in PUMP_CHANNELS}, labels, timing)


def valve_tags(valve: Valve, timing: Timing) -> tuple[Tag, ...]:
    """The position; none for a valve that a person turns."""
    if not valve.device:
        return ()
    last = float(len(valve.positions) - 1)
    told = {name: ("position", "position", "", float(VALVE_LOST), last) for name in VALVE_CHANNELS}
    return _unit_tags(valve.id, valve.device, told, {"position": valve.positions}, timing)


def chiller_tags(chiller: Chiller, timing: Timing) -> tuple[Tag, ...]:
    """Bath, set-point in force and circulation."""
    told = {
        "bath": ("bath temperature", "temperature", "degC", chiller.low_degC - 50.0, chiller.high_degC + 50.0),
        "setpoint": ("set-point in force", "temperature", "degC", chiller.low_degC, chiller.high_degC),
        "circulating": ("circulation", "state", "", 0.0, 1.0),
    }
    labels = {"circulating": ("off", "on")}
    return _unit_tags(chiller.id, chiller.device, {name: told[name] for name in CHILLER_CHANNELS}, labels, timing)


def _unit_tags(
    unit: str,
    device: str,
    told: Mapping[str, tuple[str, str, str, float, float]],
    labels: Mapping[str, tuple[str, ...]],
    timing: Timing,
) -> tuple[Tag, ...]:
    period_ns, stale_ns = timing.of(device)
    return tuple(
        Tag(
            id=f"{unit}.{channel}",
            title=f"{unit}: {title}",
            kind=TagKind.DISCRETE if channel in labels else TagKind.FEEDBACK,
            measures=measures,
            unit=symbol,
            low=low,
            high=high,
            device=device,
            channel=channel,
            period_ns=period_ns,
            stale_ns=stale_ns,
            at=unit,
            labels=labels.get(channel, ()),
        )
        for channel, (title, measures, symbol, low, high) in told.items()
    )


def cell_tags(cell: Cell, chemistry: Chemistry, liquids: tuple[Liquid, ...]) -> tuple[Tag, ...]:
    """Concentrations of the species that the cell sees, conversion, and what the un-mixing leaves over."""
    most = max((amount for liquid in liquids for amount in liquid.composition_mol_L.values()), default=1.0)
    seen = [species for species in chemistry.species if species.bands]
    rows = [(species.id, f"concentration of {species.name}", "concentration", "mol/L", most) for species in seen]
    rows.append(("conversion", f"conversion of {chemistry.reactant}", "fraction", "1", 1.0))
    rows.append(("residual", "spectrum that no species explains", "absorbance", "AU", 3.0))
    stale_ns = STALE_PERIODS * cell.period_ns
    return tuple(
        Tag(
            id=f"{cell.id}.{name}",
            title=title,
            kind=TagKind.DERIVED,
            measures=measures,
            unit=unit,
            low=-0.5 * high,
            high=2.0 * high,
            device=cell.device,
            channel="",
            period_ns=cell.period_ns,
            stale_ns=stale_ns,
            at=cell.id,
        )
        for name, title, measures, unit, high in rows
    )


def vessel_tag(vessel: Vessel) -> Tag:
    """The volume in a vessel, kept by the core's ledger; it may show more than the capacity."""
    return Tag(
        id=f"{vessel.id}.volume",
        title=f"{vessel.id}: volume by the ledger",
        kind=TagKind.DERIVED,
        measures="volume",
        unit="mL",
        low=-0.1 * vessel.capacity_mL,
        high=2.0 * vessel.capacity_mL,
        device="",
        channel="",
        period_ns=ns(_LEDGER_S),
        stale_ns=ns(STALE_PERIODS * _LEDGER_S),
        at=vessel.id,
    )


def channels_of(device: str, tags: tuple[Tag, ...]) -> tuple[ChannelSpec, ...]:
    """What is read from a device, in the order of the tags; derived tags are not read."""
    return tuple(
        ChannelSpec(tag.channel, tag.id, tag.period_ns) for tag in tags if tag.device == device and tag.channel
    )
