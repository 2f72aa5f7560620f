"""Can every pump draw, be flushed, and get rid of its liquid, at every position of the valves?"""

from __future__ import annotations

from rigd.config.checks.context import RigContext
from rigd.config.findings import listed, nearest
from rigd.logic.flow_path import FlowPathError, flow_path
from rigd.model.rig import LiquidRole, Pump, Valve, Vessel, VesselRole

_DANGLING = {"part-without-outlet", "part-without-inlet", "line-end-unknown"}
"""Findings after which nobody needs to be told that the liquid cannot reach the waste."""


def check_flow(context: RigContext) -> None:
    """Rest positions, sources and outlets; needs all lines and parts to be there."""
    for valve in context.rig.valves:
        if valve.rest not in valve.positions:
            message = f"rest position {valve.rest!r} is none of its positions{nearest(valve.rest, valve.positions)}"
            place = context.at("valves", valve.id, "rest")
            context.found.error("rest-unknown", place, message, f"write one of {listed(valve.positions)}")
    if not context.whole("lines", "vessels", "valves", "pumps", "liquids"):
        return
    for pump in context.rig.pumps:
        _sources(context, pump)
        if not _DANGLING & {problem.code for problem in context.found.problems}:
            _outlets(context, pump)
    if not context.found.failed:
        try:
            flow_path(context.rig)
        except FlowPathError as error:
            remedy = "each pump draws from a vessel or one feed valve, all pumps join one way to one outlet"
            context.found.error("flow-path", ("lines",), f"the lines make no path that can be run: {error}", remedy)


def _walk(context: RigContext, start: str, upstream: bool) -> tuple[set[str], set[tuple[str, str]]]:
    """Parts reached from ``start`` against or with the flow, and the (valve, position) ways in or out taken."""
    reached, waiting, ways = {start}, [start], set()
    while waiting:
        part = waiting.pop()
        for line in context.rig.lines:
            here, there = (line.end, line.start) if upstream else (line.start, line.end)
            if here.part == part:
                if here.port:
                    ways.add((part, here.port))
                if there.part not in reached:
                    reached.add(there.part)
                    waiting.append(there.part)
    return reached, ways


def _feed(context: RigContext, pump: Pump) -> dict[str, Vessel | None]:
    """Vessel behind each position of the pump's feed valve (key ""): ``None`` where there is none."""
    inlet = next((line for line in context.rig.lines if line.end.part == pump.id), None)
    valve = _feed_valve(context, pump)
    if inlet is None:
        return {}
    if valve is None:
        return {"": _supply(context, _walk(context, pump.id, upstream=True)[0])}
    found: dict[str, Vessel | None] = {}
    for position in valve.positions:
        starts = [
            line.start.part for line in context.rig.lines if line.end.part == valve.id and line.end.port == position
        ]
        reached = _walk(context, starts[0], upstream=True)[0] if starts else set()
        found[position] = _supply(context, reached)
    return found


def _feed_valve(context: RigContext, pump: Pump) -> Valve | None:
    inlet = next((line for line in context.rig.lines if line.end.part == pump.id), None)
    return next((valve for valve in context.rig.valves if inlet and valve.id == inlet.start.part), None)


def _supply(context: RigContext, reached: set[str]) -> Vessel | None:
    vessels = (vessel for vessel in context.rig.vessels if vessel.id in reached)
    return next((vessel for vessel in vessels if vessel.role is VesselRole.SUPPLY), None)


def _sources(context: RigContext, pump: Pump) -> None:
    feed = _feed(context, pump)
    valve = _feed_valve(context, pump)
    if not feed:
        return  # no inlet line at all: said by the check of lines
    if not any(feed.values()):
        message = f"{pump.id} has no source: no supply vessel lies upstream of it"
        remedy = 'lead a line from a vessel with role "supply" to its feed valve or inlet'
        context.found.error("pump-without-source", context.at("pumps", pump.id, "id"), message, remedy)
        return
    liquids = {liquid.id: liquid.role for liquid in context.rig.liquids}
    if valve is None:
        vessel = feed[""]
        if vessel and liquids.get(vessel.liquid) is LiquidRole.REAGENT:
            message = f"{pump.id} draws reagent only; it cannot be primed or flushed with solvent"
            remedy = "fit a feed valve with a solvent position, or plan how this pump is flushed by hand"
            context.found.warning("pump-cannot-flush", context.at("pumps", pump.id, "id"), message, remedy)
        return
    for position in (position for position, vessel in feed.items() if vessel is None):
        message = f"with {valve.id} at {position!r}, {pump.id} has no source: no supply vessel lies behind it"
        remedy = f"lead a line from a supply vessel to '{valve.id}.{position}', or remove the position"
        context.found.error("pump-without-source", context.at("valves", valve.id, "positions"), message, remedy)
    resting = feed.get(valve.rest)
    if resting and liquids.get(resting.liquid) is LiquidRole.REAGENT:
        message = f"{valve.id} rests at {valve.rest!r}, where {pump.id} draws {resting.liquid} (a reagent)"
        remedy = "a feed valve must rest at solvent, so that a lost valve sends no reagent"
        context.found.error("rest-not-solvent", context.at("valves", valve.id, "rest"), message, remedy)


def _outlets(context: RigContext, pump: Pump) -> None:
    reached, ways = _walk(context, pump.id, upstream=False)
    place = context.at("pumps", pump.id, "id")
    roles = {vessel.id: vessel.role for vessel in context.rig.vessels}
    ends = {roles[part] for part in reached if part in roles}
    if VesselRole.WASTE not in ends:
        message = f"what {pump.id} delivers can never reach a waste vessel"
        remedy = 'lead the outlet valve\'s rest position, or the last line, to a vessel with role "waste"'
        context.found.error("no-way-to-waste", place, message, remedy)
    if VesselRole.COLLECT not in ends:
        message = f"what {pump.id} delivers can never reach a vessel for collecting"
        remedy = 'add a vessel with role "collect" behind the outlet valve if points are to be collected'
        context.found.warning("no-way-to-collect", place, message, remedy)
    for valve in context.rig.valves:
        if any(part == valve.id for part, _ in ways) and valve.rest in valve.positions:
            _outlet_rest(context, valve, roles)


def _outlet_rest(context: RigContext, valve: Valve, roles: dict[str, VesselRole]) -> None:
    behind = [
        line.end.part for line in context.rig.lines if line.start.part == valve.id and line.start.port == valve.rest
    ]
    reached = _walk(context, behind[0], upstream=False)[0] if behind else set()
    if not any(roles.get(part) is VesselRole.WASTE for part in reached):
        leads = f"leads to {behind[0]}" if behind else "is closed"
        message = f"{valve.id} rests at {valve.rest!r}, which {leads}"
        remedy = "an outlet valve must rest open to a waste vessel, so that no pressure is shut in"
        context.found.error("rest-not-waste", context.at("valves", valve.id, "rest"), message, remedy)
