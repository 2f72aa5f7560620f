"""Checked tables -> ``RigDefinition``, made of what parsed so that the checks see as much of the rig as is there."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigd.config.built_in import built_in_alarms, built_in_interlocks
from rigd.config.conditions import ConditionMaker
from rigd.config.early import early_alarms, early_plan, early_tags
from rigd.config.files import RigFile
from rigd.config.findings import Findings
from rigd.config.implied import (
    Timing,
    cell_tags,
    channels_of,
    chiller_tags,
    pump_tags,
    sensor_tag,
    valve_tags,
    vessel_tag,
)
from rigd.config.pressure_side import PressureSide, pressure_sides, side_of
from rigd.config.rule_tables import AlarmTable, InterlockTable
from rigd.config.structure import declared
from rigd.config.table import ns
from rigd.model.chemistry import Chemistry
from rigd.model.devices import DeviceSpec
from rigd.model.orders import Stop
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, Priority
from rigd.model.rig import Cell, Chiller, Outside, Pump, RigDefinition, Simulation, Tag, TagKind, Valve

_STOPS = {"cut": Stop.CUT, "quench": Stop.QUENCH, "hold": Stop.HOLD}


@dataclass(frozen=True, slots=True)
class Drafted:
    """A rig as far as it could be made, and its pressure sides. Only without errors is it fit for use."""

    rig: RigDefinition
    sides: tuple[PressureSide, ...]


def compile_rig(file: RigFile, chemistry: Chemistry, found: Findings, digest: str) -> Drafted:
    """The rig that a file describes. Conditions that cannot be made become findings."""
    rig = _parts(file, chemistry, digest)
    sides = pressure_sides(rig)
    rig = replace(rig, tags=_tags(file, rig, sides))
    maker = ConditionMaker({tag.id: tag for tag in rig.tags}, _unusable(found), found)
    interlocks = tuple(lock for table in file.interlocks if (lock := _interlock(table, maker, rig)))
    rig = replace(rig, interlocks=interlocks, devices=_devices(file, rig))
    early = early_plan(rig)
    rig = replace(rig, tags=(*rig.tags, *early_tags(early)))  # after the interlocks: what only warns trips nothing
    maker = ConditionMaker({tag.id: tag for tag in rig.tags}, _unusable(found), found)
    alarms = tuple(alarm for table in file.alarms if (alarm := _alarm(table, maker)))
    implied = early_alarms(early, file.early.value(), declared(found.source, "alarms"))
    rig = replace(
        rig,
        interlocks=(*interlocks, *built_in_interlocks(rig, rig.devices)),
        alarms=(*alarms, *built_in_alarms(rig), *implied),
    )
    return Drafted(rig, sides)


def _parts(file: RigFile, chemistry: Chemistry, digest: str) -> RigDefinition:
    return RigDefinition(
        name=file.name,
        title=file.title,
        scan_ns=ns(file.scan),
        chemistry=chemistry,
        liquids=tuple(table.value() for table in file.liquids),
        vessels=tuple(table.value() for table in file.vessels),
        pumps=tuple(table.value() for table in file.pumps),
        valves=tuple(table.value() for table in file.valves),
        tees=tuple(table.value() for table in file.tees),
        columns=tuple(table.value() for table in file.columns),
        cells=tuple(table.value() for table in file.cells),
        regulators=tuple(table.value() for table in file.regulators),
        chillers=tuple(table.value() for table in file.chillers),
        lines=tuple(table.value() for table in file.lines),
        tags=(),
        interlocks=(),
        alarms=(),
        links=tuple(table.value() for table in file.links),
        devices=(),
        outside=Outside(
            file.outside.mqtt.value() if file.outside.mqtt else None,
            tuple(table.value() for table in file.outside.alerts),
        ),
        simulation=Simulation(
            file.simulation.seed, file.simulation.ambient, file.simulation.truth, file.simulation.humidity
        ),
        flush_mL_min=file.flush_flow,
        digest=digest,
        reliefs=tuple(table.value() for table in file.reliefs),
        properties=tuple(table.value() for table in file.properties),
    )


def _tags(file: RigFile, rig: RigDefinition, sides: tuple[PressureSide, ...]) -> tuple[Tag, ...]:
    timing = Timing({device.id: device for device in file.devices})
    tags: list[Tag] = []
    for sensor in file.sensors:
        side = side_of(sides, sensor.at) if sensor.measures == "pressure" else None
        tags.append(sensor_tag(sensor, timing, side.rating_bar if side else 0.0))
    tags += [tag for pump in rig.pumps for tag in pump_tags(pump, timing)]
    tags += [tag for valve in rig.valves for tag in valve_tags(valve, timing)]
    tags += [tag for chiller in rig.chillers for tag in chiller_tags(chiller, timing)]
    tags += [tag for cell in rig.cells for tag in cell_tags(cell, rig.chemistry, rig.liquids)]
    tags += [vessel_tag(vessel) for vessel in rig.vessels]
    return tuple(tags)


def _unusable(found: Findings) -> frozenset[str]:
    """Tags that the file declares in tables with findings: unknown here, but not the fault of who names them."""
    source = found.source
    names = set(declared(source, "sensors", "tag"))
    for section, channels in _CHANNELS.items():
        names |= {f"{part}.{channel}" for part in declared(source, section) for channel in channels}
    return frozenset(names)


_CHANNELS = {
    "pumps": ("flow", "level", "standby", "delivered", "state"),
    "valves": ("position",),
    "chillers": ("bath", "setpoint", "circulating"),
    "cells": ("conversion", "residual"),
    "vessels": ("volume",),
}


def _interlock(table: InterlockTable, maker: ConditionMaker, rig: RigDefinition) -> Interlock | None:
    made = [
        maker.make(condition, (*table.key_path, "trip_when", index), table.settling)
        for index, condition in enumerate(table.trip_when)
    ]
    causes = tuple(cause for cause in made if cause is not None)
    if len(causes) < len(made):
        return None
    witnesses: tuple[Condition, ...] = ()
    if table.disagree_by is not None:
        witnesses = maker.witnesses(causes, table.disagree_by, table.key_path)
    return Interlock(
        id=table.id,
        title=table.title,
        causes=causes,
        stop=_STOPS[table.stop],
        votes=int(table.vote.partition("oo")[0]) if table.vote else 1,
        on_bad=table.on_bad,
        on_delay_ns=ns(table.delay),
        clear_delay_ns=ns(table.clear_delay),
        armed=table.armed,
        consequence=table.consequence,
        response=table.response,
        basis=table.basis,
        rating=_rating(rig, {cause.tag for cause in causes if cause.kind is ConditionKind.HIGH}),
        witnesses=witnesses,
        discord_ns=ns(table.disagree_for) if witnesses else 0,
        startup_ns=ns(table.startup),
        proof_interval_s=table.proof_test,
    )


def _rating(rig: RigDefinition, tags: set[str]) -> float:
    rated = [tag.rating for tag in rig.tags if tag.id in tags and tag.rating > 0]
    return min(rated, default=0.0)


def _alarm(table: AlarmTable, maker: ConditionMaker) -> Alarm | None:
    condition = maker.make(table.when, (*table.key_path, "when"))
    suppress = None
    if table.suppress_when is not None:
        suppress = maker.make(table.suppress_when, (*table.key_path, "suppress_when"))
    if condition is None or (suppress is None and table.suppress_when is not None):
        return None
    return Alarm(
        id=table.id,
        title=table.title,
        condition=condition,
        priority=Priority(table.urgency),
        action=table.action,
        cause=table.cause,
        consequence=table.consequence,
        on_delay_ns=ns(table.on_delay),
        off_delay_ns=ns(table.off_delay),
        latching=table.latching,
        needs_acknowledge=table.acknowledge,
        hold=table.hold,
        suppress=suppress,
        realarm_ns=0 if table.realarm is None else ns(table.realarm),
        shelve_max_ns=ns(table.shelve_max),
    )


def _devices(file: RigFile, rig: RigDefinition) -> tuple[DeviceSpec, ...]:
    facts = _facts(rig)
    units = {device: unit for unit, device in _units(rig)}
    retries = {link.id: link.retries for link in rig.links}
    return tuple(
        DeviceSpec(
            id=table.id,
            driver=table.driver,
            dialect=table.dialect,
            link=table.link,
            address=table.address,
            unit=units.get(table.id, ""),
            channels=channels_of(table.id, rig.tags),
            serial_no=table.serial_no,
            options=table.options,
            facts={**facts.get(table.id, {}), "retries": retries.get(table.link, 0)},
            last_resort=table.last_resort,
        )
        for table in file.devices
    )


def _units(rig: RigDefinition) -> tuple[tuple[str, str], ...]:
    """(part, device) of every part that a device drives or reads."""
    parts: tuple[Pump | Valve | Chiller | Cell, ...] = (*rig.pumps, *rig.valves, *rig.chillers, *rig.cells)
    return tuple((part.id, part.device) for part in parts if part.device)


def _facts(rig: RigDefinition) -> Mapping[str, Mapping[str, object]]:
    """What a driver must know of the unit behind its device, by device; names as in the model."""
    facts: dict[str, dict[str, object]] = {}
    for pump in rig.pumps:
        names = ("syringes", "bore_mm", "stroke_mL", "dead_mL", "continuous", "force_limit_N")
        rates = ("rate_min_mL_min", "rate_max_mL_min", "refill_rate_mL_min")
        facts[pump.device] = {name: getattr(pump, name) for name in (*names, *rates)}
    for valve in rig.valves:
        facts[valve.device] = {name: getattr(valve, name) for name in ("positions", "rest", "travel_s")}
    for chiller in rig.chillers:
        facts[chiller.device] = {name: getattr(chiller, name) for name in ("low_degC", "high_degC", "safe_degC")}
    for cell in rig.cells:
        facts[cell.device] = {"path_um": cell.path_um, "period_s": cell.period_ns / 1e9}
    for device, spans in _spans(rig).items():
        facts.setdefault(device, {})["spans"] = spans
    return facts


def _spans(rig: RigDefinition) -> Mapping[str, Mapping[str, tuple[float, float]]]:
    """Span of each measured channel, by device."""
    spans: dict[str, dict[str, tuple[float, float]]] = {}
    for tag in rig.tags:
        if tag.kind is TagKind.MEASURED:
            spans.setdefault(tag.device, {})[tag.channel] = (tag.low, tag.high)
    return spans
