"""What the core needs to know of a run before it begins: rig, recipe and options with all look-ups made once.

A ``Program`` never changes during a run and is shared by every scan. Building one costs milliseconds, holding one
nothing.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from typing import TypeVar

from rigd.logic.early.watch import EarlyPlan, plan_of
from rigd.logic.flow_path import FlowPath, SupplyLine, flow_path
from rigd.logic.protect import conditions
from rigd.logic.protect.conditions import Watch
from rigd.logic.protect.reaction import Budgets, budgets
from rigd.logic.protect.signals import Gate, gate
from rigd.model.devices import DeviceSpec
from rigd.model.orders import Stop
from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock, Priority
from rigd.model.recipe import Recipe
from rigd.model.rig import Chiller, Liquid, LiquidRole, Pump, RigDefinition, Tag, TagKind, Valve

K = TypeVar("K")
V = TypeVar("V")

SECOND_NS = 1_000_000_000

UNATTENDED_REALARM_NS = 1800 * SECOND_NS
"""An urgent alarm of an unattended run is told again this often while it stands (proposal; no source)."""

STOP_REQUEST = "STOP-REQUEST"
CUT_REQUEST = "CUT-REQUEST"
STOP_UNCONFIRMED = "STOP-UNCONFIRMED"
BYPASS_DEMAND = "BYPASS-DEMAND"
PROOF_OVERDUE = "PROOF-OVERDUE"
RESPONSE_LATE = "RESPONSE-LATE"
PERMIT_END = "permit-end"

_BUILT_IN = (
    # id, title, fault, stop, on-delay, what to do
    (
        STOP_REQUEST,
        "Stop asked for",
        STOP_REQUEST,
        Stop.QUENCH,
        0,
        "Let the flush end, if one runs, then look at the rig.",
    ),
    (CUT_REQUEST, "Cut asked for", CUT_REQUEST, Stop.CUT, 0, "Look at the rig before a new start."),
    ("FAULT-CONDUCT", "The sequence failed", "conduct", Stop.CUT, 0, "Keep the journal and start the daemon anew."),
    ("FAULT-SCAN", "The scan came late", "scan", Stop.CUT, 0, "Find what slowed the computer before a new start."),
    ("FAULT-SUSPEND", "The computer was suspended", "suspend", Stop.CUT, 0, "Forbid sleep on this computer."),
    ("FAULT-GUARD", "The guard process is gone", "guard", Stop.CUT, 0, "Start the daemon anew."),
    ("PERMIT-END", "The permit has ended", PERMIT_END, Stop.QUENCH, 0, "Look at the rig; have the permit renewed."),
    ("ALERTS-DOWN", "Nobody can be alerted", "alerts", Stop.QUENCH, 0, "Look at the rig; mend the way of the alerts."),
    ("FAULT-JOURNAL", "The journal is not written", "journal", Stop.QUENCH, 5 * SECOND_NS, "Free the disk."),
)
"""Interlocks that protect cannot do without; added to a rig that does not declare them."""

_BUILT_IN_ALARMS = (
    # id, title, priority, what to do
    (STOP_UNCONFIRMED, "A pump was told to stop and does not confirm it", Priority.HIGHEST,
     "Take the power from this pump by hand."),
    (BYPASS_DEMAND, "A bypassed interlock would have tripped", Priority.HIGHEST,
     "Judge the cause; end the bypass or stop the run."),
    (PROOF_OVERDUE, "An interlock has no proof test in date", Priority.LOW,
     "Test it with a real stimulus before the next run, and record it with: rigd proof"),
    (RESPONSE_LATE, "The rig answers more slowly than was reckoned with", Priority.HIGH,
     "Lower the flow now; find what slows the computer or the line, then run: rigd check."),
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class RunOptions:
    """How this run differs from the files.

    ``collected``: ids of points already collected in an earlier, stopped run. ``unattended``: nobody is there, so no
    bypass is granted. The floors are the wall-time allowances of a paced run, in process time. ``permit_ns`` is when
    the permit ends, counted from the start of the run (0: it does not); ``overdue`` are interlocks without a proof test
    in date.
    """

    collected: tuple[str, ...] = ()
    unattended: bool = False
    stale_floor_ns: int = 0
    travel_floor_ns: int = 0
    permit_ns: int = 0
    overdue: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Rig, recipe, options and look-ups.

    ``interlocks`` and ``alarms`` are the rig's with the built-in ones that it lacks. ``feedback`` maps (unit, channel)
    to the tag that carries it; ``stale_ns`` holds every tag that must be renewed, and the age at which it is bad.
    ``supply`` maps a pump to {valve position: line from a vessel}; ``drain`` maps an outlet position ("" without an
    outlet valve) to the vessel behind it, "" when closed. ``tags_of`` lists the tags of a device, ``carries`` is the
    inverse of ``feedback``, ``counting`` the tags that the volume ledger follows. The rest serves protect: ``watches``
    are all conditions, found by tag (``watching``), by device or fault (``untagged``) or by interlock or alarm
    (``causes``); ``ringed`` tags keep their recent past, and the ``noisy`` ones of them may not stand still. ``early``
    is what the early rules watch, ``budgets`` how fast the interlocks must answer.
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
    tags_of: Mapping[str, tuple[str, ...]]
    carries: Mapping[str, tuple[str, str]]
    counting: frozenset[str]
    gates: Mapping[str, Gate]
    watches: tuple[Watch, ...]
    watching: Mapping[str, tuple[Watch, ...]]
    untagged: Mapping[tuple[ConditionKind, str], tuple[Watch, ...]]
    causes: Mapping[str, tuple[Watch, ...]]
    ringed: frozenset[str]
    noisy: frozenset[str]
    early: EarlyPlan
    budgets: Budgets

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
    feedback = _feedback(rig, tags)
    interlocks, alarms = _with_built_in(rig.interlocks), _with_built_in_alarms(rig.alarms)
    if options.unattended:
        alarms = tuple(_repeated(alarm) for alarm in alarms)
    early = plan_of(rig, recipe, path)
    watches = conditions.watches(interlocks, alarms, lambda condition: _watched_tag(condition, tags, feedback))
    return Program(
        rig=rig,
        recipe=recipe,
        options=options,
        path=path,
        interlocks=interlocks,
        alarms=alarms,
        tags=tags,
        stale_ns={tag.id: max(tag.stale_ns, options.stale_floor_ns) for tag in rig.tags if tag.device},
        liquids={liquid.id: liquid for liquid in rig.liquids},
        pumps={pump.id: pump for pump in rig.pumps},
        valves={valve.id: valve for valve in rig.valves},
        chillers={chiller.id: chiller for chiller in rig.chillers},
        devices={device.id: device for device in rig.devices},
        device_of=units,
        unit_of={device: unit for unit, device in units.items()},
        feedback=feedback,
        supply=_supply(path),
        drain=_drain(rig, path),
        tags_of=_grouped((tag.device, tag.id) for tag in rig.tags if tag.device),
        carries={tag: key for key, tag in feedback.items()},
        counting=frozenset(tag for key, tag in feedback.items() if key[1] in ("delivered", "position")),
        gates={tag.id: gate(tag) for tag in rig.tags},
        watches=watches,
        watching=_grouped((tag, watch) for watch in watches for tag in _looks_at(watch)),
        untagged=_grouped(((w.condition.kind, w.condition.tag), w) for w in watches if not w.tag),
        causes=_grouped((watch.owner, watch) for watch in watches),
        ringed=frozenset(watch.tag for watch in watches if watch.tag) | early.ringed,
        noisy=frozenset(watch.tag for watch in watches if watch.tag and _is_noisy(rig, watch.tag)),
        early=early,
        budgets=budgets(rig, recipe, paced=options.stale_floor_ns > 0),
    )


def _is_noisy(rig: RigDefinition, tag_id: str) -> bool:
    return any(tag.id == tag_id and tag.kind is TagKind.MEASURED and tag.noise > 0 for tag in rig.tags)


def _grouped(pairs: Iterable[tuple[K, V]]) -> dict[K, tuple[V, ...]]:
    groups: dict[K, tuple[V, ...]] = {}
    for key, value in pairs:
        groups[key] = (*groups.get(key, ()), value)
    return groups


def _looks_at(watch: Watch) -> tuple[str, ...]:
    """The tags whose samples make a condition be evaluated anew."""
    return tuple(tag for tag in dict.fromkeys((watch.tag, watch.condition.reference)) if tag)


def _watched_tag(condition: Condition, tags: Mapping[str, Tag], feedback: Mapping[tuple[str, str], str]) -> str:
    """The tag a condition looks at; a mismatch may name its unit, and then looks at what that unit reports."""
    if condition.kind in conditions.UNTAGGED:
        return ""
    if condition.tag in tags:
        return condition.tag
    channels = ("position", "setpoint", "flow")
    return next(
        (feedback[condition.tag, name] for name in channels if (condition.tag, name) in feedback), condition.tag
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
    for name, title, priority, action in _BUILT_IN_ALARMS:
        condition = Condition(ConditionKind.FAULT, name)
        found.setdefault(name, Alarm(name, title, condition, priority, action))
    return tuple(found.values())


def _repeated(alarm: Alarm) -> Alarm:
    """An urgent alarm comes back when nobody is there, unless the rig file says how often it does."""
    repeats = alarm.priority <= Priority.HIGH and not alarm.realarm_ns
    return replace(alarm, realarm_ns=UNATTENDED_REALARM_NS) if repeats else alarm


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
