"""Do bottles, flask, waste and syringes hold what the recipe moves? Simple bounds; the dry run knows better.

Lower bound: every point settles after ``settle.volumes`` and is collected. Upper bound: it needs
``settle.volumes_max``. One volume is the hold-up from the first merge to the outlet valve.
"""

from __future__ import annotations

from rigd.config.checks.recipe import ROUNDING, RecipeContext
from rigd.logic.flow_path import FlowPath
from rigd.model.recipe import PointKind
from rigd.model.rig import LiquidRole, Vessel, VesselRole


def check_volumes(context: RecipeContext) -> None:
    """All findings about volumes; needs a flow path."""
    if context.path is None:
        return
    _flask(context)
    _bottles(context, context.path)
    _waste(context, context.path)
    _syringes(context)


def _flask(context: RecipeContext) -> None:
    collect, path = context.file.collect, context.path
    if collect is None or path is None or collect.position not in path.outlets:
        return
    vessel = _vessel(context, path.outlets[collect.position].vessel)
    if vessel is None:
        return
    total = collect.volume * len(context.points)
    if total > vessel.capacity_mL - vessel.content_mL:
        message = f"{len(context.points)} points of {collect.volume:g} mL are {total:g} mL;"
        message += f" {vessel.id} has room for {vessel.capacity_mL - vessel.content_mL:g} mL"
        remedy = "collect less, use fewer points or a larger flask"
        context.found.error("flask-too-small", ("collect", "volume"), message, remedy)


def _vessel(context: RecipeContext, name: str) -> Vessel | None:
    return next((vessel for vessel in context.rig.vessels if vessel.id == name), None)


def point_mL(context: RecipeContext, path: FlowPath, longest: bool) -> float:
    """Liquid that one point moves in all, at least or at most."""
    settle, collect = context.file.settle, context.file.collect
    if settle is None or collect is None:
        return 0.0
    return (settle.volumes_max if longest else settle.volumes) * path.trunk_mL + collect.volume


def drawn_mL(context: RecipeContext, path: FlowPath, longest: bool) -> dict[str, float]:
    """Volume drawn from each vessel."""
    drawn: dict[str, float] = {}
    solvent = _of_role(context, path, LiquidRole.SOLVENT)
    reagent = _of_role(context, path, LiquidRole.REAGENT)
    for point in context.points:
        vessels = solvent if point.kind is PointKind.BLANK else reagent
        total = point.total_mL_min
        for pump, flow in point.flows_mL_min.items():
            vessel = vessels.get(pump) or solvent.get(pump) or reagent.get(pump, "")
            drawn[vessel] = drawn.get(vessel, 0.0) + point_mL(context, path, longest) * flow / total
    washed = _solvent_mL(context, path) / max(len(path.feeds), 1)
    for pump, vessel in solvent.items():
        drawn[vessel] = drawn.get(vessel, 0.0) + washed
        rinses = context.file.switchover.rinses if context.file.switchover else 0
        stroke = next((pump_.stroke_mL for pump_ in context.rig.pumps if pump_.id == pump), 0.0)
        if pump in reagent:
            drawn[reagent[pump]] = drawn.get(reagent[pump], 0.0) + rinses * stroke * longest
    drawn.pop("", None)
    return drawn


def _of_role(context: RecipeContext, path: FlowPath, role: LiquidRole) -> dict[str, str]:
    """The vessel from which each pump draws a liquid of this role."""
    roles = {liquid.id: liquid.role for liquid in context.rig.liquids}
    return {line.pump: line.vessel for line in reversed(path.supply_lines) if roles.get(line.liquid) is role}


def _solvent_mL(context: RecipeContext, path: FlowPath) -> float:
    """Solvent for priming, conditioning and flushing, in all."""
    file = context.file
    volumes = sum(table.volumes for table in (file.prime, file.conditioning, file.flush) if table is not None)
    return volumes * path.wetted_mL


def _bottles(context: RecipeContext, path: FlowPath) -> None:
    least, most = drawn_mL(context, path, longest=False), drawn_mL(context, path, longest=True)
    for vessel in context.rig.vessels:
        if vessel.role is not VesselRole.SUPPLY:
            continue
        place = context.sweep_key if context.points else ("flush", "volumes")
        if least.get(vessel.id, 0.0) > vessel.content_mL:
            message = (
                f"at least {least[vessel.id]:.3g} mL are drawn from {vessel.id}, which holds {vessel.content_mL:g} mL"
            )
            context.found.error(
                "bottle-short", place, message, "fill it further, or use fewer points or smaller volumes"
            )
        elif most.get(vessel.id, 0.0) > vessel.content_mL:
            message = (
                f"up to {most[vessel.id]:.3g} mL may be drawn from {vessel.id}, which holds {vessel.content_mL:g} mL"
            )
            remedy = "it lasts if the points settle early; the dry run tells"
            context.found.warning("bottle-tight", place, message, remedy)


def _waste(context: RecipeContext, path: FlowPath) -> None:
    waste = [vessel for vessel in context.rig.vessels if vessel.role is VesselRole.WASTE]
    room = sum(vessel.capacity_mL - vessel.content_mL for vessel in waste)
    total = sum(drawn_mL(context, path, longest=False).values())
    if waste and total > room:
        message = f"about {total:.3g} mL flow, but the waste has room for {room:.3g} mL"
        context.found.warning(
            "waste-too-small", context.sweep_key, message, "empty it before the start, or use a larger one"
        )


def _syringes(context: RecipeContext) -> None:
    """A fraction may not be cut by a refill; a refill may not be slower than the delivery."""
    collect = context.file.collect
    for pump in context.rig.pumps:
        usable = pump.stroke_mL - pump.dead_mL
        flows = [(point.flows_mL_min.get(pump.id, 0.0), point.total_mL_min) for point in context.points]
        part_mL = max((flow / total for flow, total in flows), default=0.0) * (collect.volume if collect else 0.0)
        if pump.syringes == 1 and part_mL > usable * (1 + ROUNDING):
            message = f"{pump.id} would have to deliver {part_mL:.3g} mL into one fraction;"
            message += f" its only syringe holds {usable:g} mL"
            remedy = "collect less per point, or fit a larger syringe or two"
            context.found.error("collect-above-stroke", ("collect", "volume"), message, remedy)
        fastest = max((flow for flow, _ in flows), default=0.0)
        if pump.syringes == 2 and fastest >= pump.refill_rate_mL_min:
            message = f"{pump.id} delivers up to {fastest:.3g} mL/min but refills at {pump.refill_rate_mL_min:g} mL/min"
            remedy = "its flow will be interrupted; choose lower flows or a faster refill"
            context.found.warning("refill-too-slow", context.sweep_key, message, remedy)
