"""What the core needs to know of a run before it begins: rig, recipe and options with all look-ups made once.

A ``Program`` never changes during a run and is shared by every scan. Building one costs milliseconds, holding one
nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigd.logic.flow_path import FlowPath, SupplyLine, flow_path
from rigd.model.devices import DeviceSpec
from rigd.model.orders import Stop
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, Priority
from rigd.model.recipe import Recipe
from rigd.model.rig import Chiller, Liquid, LiquidRole, Pump, RigDefinition, Tag, TagKind, Valve

SECOND_NS = 1_000_000_000

STOP_REQUEST = "STOP-REQUEST"
CUT_REQUEST = "CUT-REQUEST"
STOP_UNCONFIRMED = "STOP-UNCONFIRMED"
BYPASS_DEMAND = "BYPASS-DEMAND"

_BUILT_IN = (
    # id, title, fault, stop, on-delay, what to do
    (STOP_REQUEST, "Stop asked for", STOP_REQUEST, Stop.QUENCH, 0, "Wait for the flush, then look at the rig."),
    (CUT_REQUEST, "Cut asked for", CUT_REQUEST, Stop.CUT, 0, "Look at the rig before a new start."),
    ("FAULT-CONDUCT", "The sequence failed", "conduct", Stop.CUT, 0, "Keep the journal and start the daemon anew."),
    ("FAULT-SCAN", "The scan came late", "scan", Stop.CUT, 0, "Find what slowed the computer before a new start."),
    ("FAULT-SUSPEND", "The computer was suspended", "suspend", Stop.CUT, 0, "Forbid sleep on this computer."),
    ("FAULT-GUARD", "The guard process is gone", "guard", Stop.CUT, 0, "Start the daemon anew."),
    ("FAULT-JOURNAL", "The journal is not written", "journal", Stop.QUENCH, 5 * SECOND_NS, "Free the disk."),
)
"""Interlocks that protect cannot do without; added to a rig that does not declare them."""

_BUILT_IN_ALARMS = (
    (STOP_UNCONFIRMED, "A pump was told to stop and does not confirm it", "Take the power from this pump by hand."),
    (BYPASS_DEMAND, "A bypassed interlock would have tripped", "Judge the cause; end the bypass or stop the run."),
)


@dataclass(frozen=True, slots=True)
class RunOptions:
    """How this run differs from the files.

    ``collected``: ids of points already collected in an earlier, stopped run. ``unattended``: nobody is there, so no
    bypass is granted. The floors are the wall-time allowances of a paced run, in process time.
    """

    collected: tuple[str, ...] = ()
    unattended: bool = False
    stale_floor_ns: int = 0
    travel_floor_ns: int = 0


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Rig, recipe, options and look-ups.

    ``interlocks`` and ``alarms`` are the rig's with the built-in ones that it lacks. ``feedback`` maps (unit, channel)
    to the tag that carries it; ``stale_ns`` holds every tag that must be renewed, and the age at which it is bad.
    ``supply`` maps a pump to {valve position: line from a vessel}; ``drain`` maps an outlet position ("" without an
    outlet valve) to the vessel behind it, "" when closed.
    """

    rig: RigDefinition
    recipe: Recipe
    options: RunOptions
    path: FlowPath
    interlocks: tuple[Interlock, ...]
    alarms: tuple[Alarm, ...]
    tags: Mapping[str, Tag]
    stale_ns: Mapping[str, int]
    liquids: Mapping[str, Liquid]
    pumps: Mapping[str, Pump]
    valves: Mapping[str, Valve]
    chillers: Mapping[str, Chiller]
    devices: Mapping[str, DeviceSpec]
    device_of: Mapping[str, str]
    unit_of: Mapping[str, str]
    feedback: Mapping[tuple[str, str], str]
    supply: Mapping[str, Mapping[str, SupplyLine]]
    drain: Mapping[str, str]

    def is_solvent(self, liquid: str) -> bool:
        """True for a declared solvent; an unknown liquid counts as reagent."""
        found = self.liquids.get(liquid)
        return found is not None and found.role is LiquidRole.SOLVENT


def compile_program(rig: RigDefinition, recipe: Recipe, options: RunOptions | None = None) -> Program:
    """Make the look-ups. Raises ``FlowPathError`` for a rig whose pumps lead nowhere."""
    options = options or RunOptions()
    path = flow_path(rig)
    tags = {tag.id: tag for tag in rig.tags}
    parts: tuple[Pump | Valve | Chiller, ...] = (*rig.pumps, *rig.valves, *rig.chillers)
    units = {part.id: part.device for part in parts if part.device}
    return Program(
        rig=rig,
        recipe=recipe,
        options=options,
        path=path,
        interlocks=_with_built_in(rig.interlocks),
        alarms=_with_built_in_alarms(rig.alarms),
        tags=tags,
        stale_ns={tag.id: max(tag.stale_ns, options.stale_floor_ns) for tag in rig.tags if tag.device},
        liquids={liquid.id: liquid for liquid in rig.liquids},
        pumps={pump.id: pump for pump in rig.pumps},
        valves={valve.id: valve for valve in rig.valves},
        chillers={chiller.id: chiller for chiller in rig.chillers},
        devices={device.id: device for device in rig.devices},
        device_of=units,
        unit_of={device: unit for unit, device in units.items()},
        feedback=_feedback(rig, tags),
        supply=_supply(path),
        drain=_drain(rig, path),
    )


def _with_built_in(declared: tuple[Interlock, ...]) -> tuple[Interlock, ...]:
    """The rig's interlocks; the built-in ones get the cause that protect itself feeds."""
    found = {interlock.id: interlock for interlock in declared}
    for name, title, fault, stop, delay_ns, response in _BUILT_IN:
        cause = (Condition(ConditionKind.FAULT, fault),)
        base = found.get(name) or Interlock(
            name, title, cause, stop, on_delay_ns=delay_ns, response=response, basis="built in", built_in=True
        )
        found[name] = replace(base, causes=cause)
    return tuple(found.values())


def _with_built_in_alarms(declared: tuple[Alarm, ...]) -> tuple[Alarm, ...]:
    found = {alarm.id: alarm for alarm in declared}
    for name, title, action in _BUILT_IN_ALARMS:
        condition = Condition(ConditionKind.FAULT, name)
        found.setdefault(name, Alarm(name, title, condition, Priority.HIGHEST, action))
    return tuple(found.values())


def _feedback(rig: RigDefinition, tags: Mapping[str, Tag]) -> dict[tuple[str, str], str]:
    return {
        (device.unit, channel.channel): channel.tag
        for device in rig.devices
        if device.unit
        for channel in device.channels
        if channel.tag in tags and tags[channel.tag].kind is not TagKind.DERIVED
    }


def _supply(path: FlowPath) -> dict[str, dict[str, SupplyLine]]:
    supply: dict[str, dict[str, SupplyLine]] = {feed.pump: {} for feed in path.feeds}
    for line in path.supply_lines:
        supply[line.pump][line.position] = line
    return supply


def _drain(rig: RigDefinition, path: FlowPath) -> dict[str, str]:
    """Vessel behind each outlet position; without an outlet valve, the vessel at the end of the last line."""
    if path.outlet_valve:
        return {position: outlet.vessel for position, outlet in path.outlets.items()}
    vessels = {vessel.id for vessel in rig.vessels}
    last = path.trunk[-1].id if path.trunk else path.feeds[0].pump
    ends = {line.id: line.end.part for line in rig.lines}
    starts = {line.start.part: line.end.part for line in rig.lines}
    end = ends.get(last, starts.get(last, ""))
    return {"": end if end in vessels else ""}
