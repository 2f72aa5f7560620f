"""Does the recipe ask only for what this rig has and may do? Names, flows, temperatures, limits."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from pydantic_core import PydanticCustomError

from rigd.config.checks.identity import report_duplicates
from rigd.config.conditions import DIMENSIONS
from rigd.config.files import RecipeFile
from rigd.config.findings import Findings, listed, nearest
from rigd.config.lines import Path
from rigd.config.quantity import read_quantity
from rigd.config.rule_tables import difference
from rigd.config.sweep_tables import SweepTable
from rigd.logic.flow_path import FlowPath
from rigd.model.protection import ConditionKind
from rigd.model.recipe import Point
from rigd.model.rig import Chiller, RigDefinition, TagKind, Valve, VesselRole

ROUNDING = 1e-9
"""Relative slack of comparisons between computed flows and limits."""


@dataclass(frozen=True)
class RecipeContext:
    """A recipe file, its points, its rig with the flow path (``None`` when the rig has none), the findings."""

    file: RecipeFile
    points: tuple[Point, ...]
    rig: RigDefinition
    path: FlowPath | None
    found: Findings

    @property
    def chillers(self) -> tuple[Chiller, ...]:
        """Chillers that hold a column."""
        jackets = {column.jacket for column in self.rig.columns}
        return tuple(chiller for chiller in self.rig.chillers if chiller.id in jackets)

    @property
    def outlet_valve(self) -> Valve | None:
        """The valve at the end of the path, if the rig has one."""
        name = self.path.outlet_valve if self.path else ""
        return next((valve for valve in self.rig.valves if valve.id == name), None)

    @property
    def sweep_key(self) -> Path:
        """The key of the sweep that states the flows."""
        sweep = self.file.sweep
        for key in ("points", "residence_time", "total_flow"):
            if sweep is not None and getattr(sweep, key) is not None:
                return ("sweep", key)
        return ("sweep",)


def check_recipe(context: RecipeContext) -> None:
    """Everything about a recipe that its structure cannot tell, but volumes."""
    report_duplicates(
        context.found, "checklist item", [(item.id, (*item.key_path, "id")) for item in context.file.checklist]
    )
    _sections(context)
    _sheet_present(context)
    _positions(context)
    _signal(context)
    _pump_names(context)
    _flows(context)
    _times(context)
    if context.file.sweep is not None:
        _no_twins(context, context.file.sweep)
        if context.file.sweep.residence_time is not None and not context.rig.columns:
            message = "the rig has no column, so a residence time says nothing about the flow"
            context.found.error("no-column", ("sweep", "residence_time"), message, "state total_flow instead")


def _sections(context: RecipeContext) -> None:
    file, found = context.file, context.found
    data = found.source.data
    if file.switchover is not None and file.sweep is None and "sweep" not in data:
        message = "the recipe draws reagent ([switchover]) but has no points"
        found.error("points-missing", ("switchover",), message, "add a [sweep] section, or remove [switchover]")
    for key in ("settle", "collect"):
        if file.sweep is not None and getattr(file, key) is None and key not in data:
            message = f"a recipe with points needs a [{key}] section"
            found.error("section-missing", ("sweep",), message, f"add [{key}]; the example recipes show how")


def _sheet_present(context: RecipeContext) -> None:
    if context.file.switchover is None or context.file.sheet is not None or "sheet" in context.found.source.data:
        return
    message = "the recipe draws reagent, but there is no chemistry sheet; without it only solvent may run"
    remedy = "let a competent person fill in a [sheet] section, or remove [switchover]"
    context.found.error("sheet-missing", ("switchover",), message, remedy)


def _positions(context: RecipeContext) -> None:
    if context.path is None:
        return
    collect, leak = context.file.collect, context.file.leak_test
    if collect is not None:
        _position(context, ("collect", "position"), collect.position, VesselRole.COLLECT)
        _position(context, ("collect", "waste_position"), collect.waste_position, VesselRole.WASTE)
    if leak is not None and leak.shut_position:
        _position(context, ("leak_test", "shut_position"), leak.shut_position, None)


def _position(context: RecipeContext, key: Path, position: str, role: VesselRole | None) -> None:
    valve, found = context.outlet_valve, context.found
    if valve is None:
        message = f"the rig has no outlet valve, so there is no position {position!r}"
        remedy = 'write shut_position = "" to be asked to plug the outlet' if role is None else "fit an outlet valve"
        found.error("position-unknown", key, message, remedy)
        return
    if position not in valve.positions:
        message = f"outlet valve {valve.id} has no position {position!r}{nearest(position, valve.positions)}"
        found.error("position-unknown", key, message, f"its positions: {listed(valve.positions)}")
        return
    assert context.path is not None
    vessel = context.path.outlets[position].vessel
    roles = {vessel.id: vessel.role for vessel in context.rig.vessels}
    if role is None and vessel:
        message = f"position {position!r} of {valve.id} is open to {vessel}; no pressure can be held there"
        found.error("position-wrong", key, message, "name a position without a line, or fit a plug there")
    if role is not None and roles.get(vessel) is not role:
        leads = f"leads to {vessel}" if vessel else "is closed"
        message = f"position {position!r} of {valve.id} {leads}, not to a vessel with role {role.value!r}"
        right = [name for name, outlet in context.path.outlets.items() if roles.get(outlet.vessel) is role]
        found.error("position-wrong", key, message, f"positions that do: {listed(right)}")


def _signal(context: RecipeContext) -> None:
    settle = context.file.settle
    if settle is None:
        return
    tags = {tag.id: tag for tag in context.rig.tags}
    tag = tags.get(settle.signal)
    if tag is None:
        usable = [name for name, known in tags.items() if known.kind in (TagKind.MEASURED, TagKind.DERIVED)]
        message = f"the rig has no tag {settle.signal!r}{nearest(settle.signal, tags)}"
        context.found.error("tag-unknown", ("settle", "signal"), message, f"signals of this rig: {listed(usable)}")
        return
    dimension = DIMENSIONS.get(tag.unit, "")
    if not dimension:
        message = f"{tag.id} is a position or state; it never becomes steady"
        context.found.error("comparison-wrong", ("settle", "signal"), message, "name a measured or derived tag")
        return
    try:
        read_quantity(settle.tolerance, difference(dimension), "positive")
    except PydanticCustomError as error:
        remedy = f"{tag.id} is measured in {tag.unit}"
        context.found.error(error.type, ("settle", "tolerance"), error.message(), remedy)


def _pump_names(context: RecipeContext) -> None:
    pumps = {pump.id: pump for pump in context.rig.pumps}
    for path, named in _named_flows(context):
        for name in named:
            _pump(context, name, (*path, name))
        missing = [pump for pump in pumps if pump not in named]
        if missing:
            message = f"nothing is said about {listed(missing)}"
            remedy = "every pump of the rig needs a number here; a feed that stands still would change by itself"
            context.found.error("pump-missing", path, message, remedy)
    for name, volume in context.file.refill_below.items():
        place = ("refill_below", name)
        _pump(context, name, place)
        pump = pumps.get(name)
        if pump and volume >= pump.stroke_mL - pump.dead_mL:
            message = f"{volume:g} mL is not below what a full syringe of {name} delivers"
            message += f" ({pump.stroke_mL - pump.dead_mL:g} mL): it would refill for ever"
            context.found.error("refill-above-stroke", place, message, "choose a smaller volume")


def _named_flows(context: RecipeContext) -> Iterable[tuple[Path, Iterable[str]]]:
    sweep = context.file.sweep
    if sweep is None:
        return
    for index, flows in enumerate(sweep.points or ()):
        yield ("sweep", "points", index), flows
    if isinstance(sweep.ratio, tuple):
        yield from ((("sweep", "ratio", index), ratio) for index, ratio in enumerate(sweep.ratio))
    elif sweep.ratio is not None:
        yield ("sweep", "ratio"), sweep.ratio


def _pump(context: RecipeContext, name: str, place: Path) -> None:
    known = [pump.id for pump in context.rig.pumps]
    if name not in known:
        message = f"the rig has no pump {name!r}{nearest(name, known)}"
        context.found.error("pump-unknown", place, message, f"its pumps: {listed(known)}")


def _no_twins(context: RecipeContext, sweep: SweepTable) -> None:
    """The same flow, time, ratio or temperature twice in one list."""
    for key in ("points", "total_flow", "residence_time", "ratio", "temperature"):
        values = getattr(sweep, key)
        seen: list[object] = []
        for index, value in enumerate(values if isinstance(values, tuple) else ()):
            if value in seen:
                message = f"the same as item {seen.index(value) + 1}"
                remedy = "remove it; to measure every point again write repeats = 2 or return_every = n"
                context.found.error("point-duplicate", ("sweep", key, index), message, remedy)
            seen.append(value)


def _flows(context: RecipeContext) -> None:
    pumps = {pump.id: pump for pump in context.rig.pumps}
    told: set[tuple[str, bool]] = set()
    for point in context.points:
        for name, flow in point.flows_mL_min.items():
            pump = pumps.get(name)
            if pump is None or (name, flow > pump.rate_max_mL_min) in told:
                continue
            low, high = pump.rate_min_mL_min * (1 - ROUNDING), pump.rate_max_mL_min * (1 + ROUNDING)
            if not low <= flow <= high:
                told.add((name, flow > pump.rate_max_mL_min))
                message = f"point {point.id} needs {flow:.4g} mL/min from {name}, which delivers"
                message += f" {pump.rate_min_mL_min:g} to {pump.rate_max_mL_min:g} mL/min"
                context.found.error("flow-out-of-range", context.sweep_key, message, "change the flow or the ratio")
    for place, total in _totals(context):
        share = total / len(pumps) if pumps else 0.0
        for pump in pumps.values():
            if not pump.rate_min_mL_min <= share <= pump.rate_max_mL_min * (1 + ROUNDING):
                message = f"{total:g} mL/min in total are {share:.4g} mL/min for {pump.id}, which delivers"
                message += f" {pump.rate_min_mL_min:g} to {pump.rate_max_mL_min:g} mL/min"
                context.found.error("flow-out-of-range", place, message, "change the flow")
                break


def _totals(context: RecipeContext) -> Iterable[tuple[Path, float]]:
    """Total flows of solvent, which the pumps share evenly."""
    for section, key in (
        ("prime", "total_flow"),
        ("conditioning", "total_flow"),
        ("leak_test", "fill_flow"),
        ("switchover", "total_flow"),
        ("flush", "total_flow"),
    ):
        table = getattr(context.file, section)
        if table is not None:
            yield (section, key), getattr(table, key)


def _times(context: RecipeContext) -> None:
    conditioning, settle = context.file.conditioning, context.file.settle
    if conditioning is not None and conditioning.min_time >= conditioning.max_time:
        message = f"min_time ({conditioning.min_time:g} s) is not below max_time ({conditioning.max_time:g} s)"
        context.found.error("range-empty", ("conditioning", "max_time"), message, "correct one of them")
    if conditioning is not None and conditioning.steady_for >= conditioning.max_time:
        message = f"steady_for ({conditioning.steady_for:g} s) is not below max_time ({conditioning.max_time:g} s)"
        context.found.error("range-empty", ("conditioning", "steady_for"), message, "correct one of them")
    if settle is not None and settle.volumes >= settle.volumes_max:
        message = f"volumes ({settle.volumes:g}) is not below volumes_max ({settle.volumes_max:g})"
        context.found.error("range-empty", ("settle", "volumes_max"), message, "correct one of them")


def trip_limits(rig: RigDefinition, measures: str) -> list[tuple[float, str, str]]:
    """(limit, tag, interlock) of every absolute high limit on what is measured, lowest first."""
    tags = {tag.id: tag for tag in rig.tags if tag.measures == measures and tag.kind is TagKind.MEASURED}
    causes = [(cause, lock.id) for lock in rig.interlocks for cause in lock.causes]
    return sorted((c.limit, c.tag, lock) for c, lock in causes if c.kind is ConditionKind.HIGH and c.tag in tags)
