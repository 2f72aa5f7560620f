"""Single parts: numbers that must fit each other, and names that they use."""

from __future__ import annotations

from dataclasses import fields

from rigd.config.checks.cold import check_rest_temperature
from rigd.config.checks.context import RigContext
from rigd.config.checks.early import check_early
from rigd.config.checks.identity import report_duplicates
from rigd.config.checks.reliefs import check_reliefs
from rigd.config.findings import listed, nearest
from rigd.model.rig import Pump, VesselRole

_COLUMN_PLACES = ("inlet", "middle", "outlet", "jacket")


def check_parts(context: RigContext) -> None:
    """Vessels, valves, pumps, columns, chillers, sensors' places, the simulator's truths."""
    _vessels(context)
    _valves(context)
    _pumps(context)
    _columns(context)
    _packing_and_chemistry(context)
    _chillers(context)
    check_reliefs(context)
    check_rest_temperature(context)
    check_early(context)
    _places(context)
    _truths(context)


def _vessels(context: RigContext) -> None:
    known = context.names("liquids")
    for vessel in context.rig.vessels:
        place = context.at("vessels", vessel.id, "liquid")
        if vessel.role is VesselRole.SUPPLY and not vessel.liquid:
            message = f"{vessel.id} is a supply but names no liquid"
            context.found.error("liquid-missing", place, message, f"write liquid = one of {listed(sorted(known))}")
        elif vessel.liquid and vessel.liquid not in known:
            message = f"no liquid {vessel.liquid!r}{nearest(vessel.liquid, known)}"
            context.found.error("liquid-unknown", place, message, f"declared liquids: {listed(sorted(known))}")
        if vessel.content_mL > vessel.capacity_mL:
            message = f"{vessel.content_mL:g} mL do not fit into {vessel.capacity_mL:g} mL"
            context.found.error(
                "content-above-capacity", context.at("vessels", vessel.id, "content"), message, "correct one"
            )
    used = {vessel.liquid for vessel in context.rig.vessels}
    for liquid in context.rig.liquids:
        if liquid.id not in used and context.whole("vessels"):
            message = f"no vessel holds liquid {liquid.id!r}"
            context.found.warning(
                "liquid-unused", context.at("liquids", liquid.id, "id"), message, "remove it, or use it"
            )
        for species in liquid.composition_mol_L:
            if context.species and species not in context.species:
                message = f"the chemistry has no species {species!r}{nearest(species, context.species)}"
                place = context.at("liquids", liquid.id, "composition", species)
                remedy = f"its species: {listed(sorted(context.species))}"
                context.found.error("species-unknown", place, message, remedy)


def _valves(context: RigContext) -> None:
    for valve in context.rig.valves:
        place = context.at("valves", valve.id, "positions")
        report_duplicates(context.found, "position", [(name, (*place, i)) for i, name in enumerate(valve.positions)])


def _pumps(context: RigContext) -> None:
    for table in context.file.pumps:
        for key in table.missing:
            remedy = f"add {key}, or write syringes = 0 for a pump that has none"
            message = f"{key!r} is missing: a pump with syringes needs it"
            context.found.error("key-missing", context.at("pumps", table.id, key), message, remedy)
    share = context.rig.flush_mL_min / max(len(context.rig.pumps), 1)
    for pump in context.rig.pumps:
        if pump.rate_min_mL_min >= pump.rate_max_mL_min:
            message = f"smallest rate {pump.rate_min_mL_min:g} mL/min, largest {pump.rate_max_mL_min:g} mL/min"
            context.found.error("range-empty", context.at("pumps", pump.id, "rate_max"), message, "correct one of them")
        elif context.whole("pumps") and not pump.rate_min_mL_min <= share <= pump.rate_max_mL_min:
            message = (
                f"{context.rig.flush_mL_min:g} mL/min in total are {share:.4g} mL/min for {pump.id}, which delivers"
            )
            message += f" {pump.rate_min_mL_min:g} to {pump.rate_max_mL_min:g} mL/min"
            context.found.error("flow-out-of-range", ("flush_flow",), message, "change the flow of the flush")
        _dead_head(context, pump)
        if pump.dead_mL >= pump.stroke_mL:
            message = f"the dead volume ({pump.dead_mL:g} mL) is not below the stroke ({pump.stroke_mL:g} mL)"
            context.found.error(
                "range-empty", context.at("pumps", pump.id, "dead_volume"), message, "correct one of them"
            )


def _dead_head(context: RigContext, pump: Pump) -> None:
    """A block right behind a pump is seen by no sensor further on: then only the motor's own limit is left."""
    if any(tag.measures == "pressure" and tag.at == pump.id for tag in context.rig.tags):
        return
    place = context.at("pumps", pump.id, "force_limit")
    remedy = (
        'write force_limit = "130 N" as set on the pump, below rating times piston area, or fit a sensor at the pump'
    )
    if pump.force_limit_N <= 0.0:
        message = f"nothing shows a block right behind {pump.id}: no pressure sensor there and no force limit stated"
        context.found.warning("dead-head-unseen", place, message, remedy)
    elif pump.stall_bar >= pump.rating_bar:
        message = f"{pump.id} gives up at {pump.stall_bar:.3g} bar only, but is rated for {pump.rating_bar:g} bar"
        context.found.warning("dead-head-unseen", place, message, remedy)


def _columns(context: RigContext) -> None:
    chillers = context.names("chillers")
    for column in context.rig.columns:
        if column.jacket and column.jacket not in chillers:
            message = f"no chiller {column.jacket!r}{nearest(column.jacket, chillers)}"
            remedy = f"declared chillers: {listed(sorted(chillers))}; without the key the column is at room temperature"
            context.found.error("jacket-unknown", context.at("columns", column.id, "jacket"), message, remedy)
        if column.packing.bead_diameter_mm >= column.bore_mm:
            message = f"beads of {column.packing.bead_diameter_mm:g} mm in a bore of {column.bore_mm:g} mm"
            place = context.at("columns", column.id, "packing", "bead_diameter")
            context.found.error("beads-too-large", place, message, "check both units (um, mm)")


def _packing_and_chemistry(context: RigContext) -> None:
    """What the chemistry asks of the packing, and the packing of the chemistry."""
    for column in context.rig.columns:
        for species in column.packing.retention:
            if context.species and species not in context.species:
                message = f"the chemistry has no species {species!r}{nearest(species, context.species)}"
                place = context.at("columns", column.id, "packing", "retention", species)
                context.found.error(
                    "species-unknown", place, message, f"its species: {listed(sorted(context.species))}"
                )
    counted = [r.id for r in context.rig.chemistry.reactions if r.deactivation_turnovers or r.leaching_per_volume]
    for column in context.rig.columns if counted else ():
        packing = column.packing
        if packing.catalyst and packing.mass_g * packing.active_sites_mmol_g <= 0.0:
            message = f"{counted[0]} counts active sites (turnovers, leaching), but {column.id} declares none"
            place = context.at("columns", column.id, "packing", "active_sites")
            context.found.error("sites-missing", place, message, 'write mass and active_sites, such as "4.7 mmol/g"')


def _chillers(context: RigContext) -> None:
    jackets = {column.jacket for column in context.rig.columns}
    for chiller in context.rig.chillers:
        if chiller.low_degC >= chiller.high_degC:
            message = f"the range runs from {chiller.low_degC:g} to {chiller.high_degC:g} degC"
            place = context.at("chillers", chiller.id, "range")
            context.found.error("range-empty", place, message, "write the lower end first")
        elif not chiller.low_degC <= chiller.safe_degC <= chiller.high_degC:
            message = f"{chiller.safe_degC:g} degC lies outside its range"
            message += f" ({chiller.low_degC:g} to {chiller.high_degC:g} degC)"
            place = context.at("chillers", chiller.id, "safe_temperature")
            context.found.error("temperature-out-of-range", place, message, "choose a temperature that it can hold")
        if chiller.id not in jackets and context.whole("columns"):
            message = f"no column has its jacket on {chiller.id}"
            place = context.at("chillers", chiller.id, "id")
            context.found.warning("chiller-unused", place, message, f"write jacket = {chiller.id!r} at the column")


def _places(context: RigContext) -> None:
    parts = context.parts()
    for sensor in context.file.sensors:
        part, _, where = sensor.at.partition(".")
        place = (*sensor.key_path, "at")
        if part not in parts:
            message = f"no part {part!r}{nearest(part, parts)}"
            context.found.error("part-unknown", place, message, f"known parts: {listed(sorted(parts))}")
        elif where and (parts[part] != "columns" or where not in _COLUMN_PLACES):
            message = f"{part} has no place {where!r}"
            remedy = f"at a column: {listed(_COLUMN_PLACES)}; any other part is named alone"
            context.found.error("place-unknown", place, message, remedy)


def _truths(context: RigContext) -> None:
    """Only what the rig has can be otherwise in the simulator."""
    rig = context.rig
    numbers: dict[str, set[str]] = {}
    for parts in (
        rig.pumps,
        rig.valves,
        rig.tees,
        rig.columns,
        rig.cells,
        rig.regulators,
        rig.reliefs,
        rig.chillers,
        rig.lines,
    ):
        for part in parts:
            holders = [part, part.packing] if hasattr(part, "packing") else [part]
            numbers[part.id] = {
                field.name
                for holder in holders
                for field in fields(holder)
                if isinstance(getattr(holder, field.name), float)
            }
    declared = context.parts().keys() | context.names("lines")
    for path in rig.simulation.truth:
        owner, _, name = path.partition(".")
        place = ("simulation", "truth", path)
        if owner not in numbers and owner not in declared:
            message = f"no part {owner!r}{nearest(owner, numbers)}"
            context.found.error("part-unknown", place, message, f"known parts: {listed(sorted(numbers))}")
        elif owner in numbers and name not in numbers[owner]:
            message = f"{owner} has no number {name!r}{nearest(name, numbers[owner])}"
            context.found.error("truth-unknown", place, message, f"it has {listed(sorted(numbers[owner]))}")
