"""Relief valves: where they stand, where they let out, and whether they protect what they stand at."""

from __future__ import annotations

from rigd.config.checks.context import RigContext
from rigd.config.findings import listed, nearest
from rigd.config.pressure_side import side_of
from rigd.model.rig import Relief, VesselRole

_WETTED = ("pumps", "valves", "tees", "columns", "cells", "regulators")


def check_reliefs(context: RigContext) -> None:
    """Every relief valve's place, outlet and pressures."""
    for relief in context.rig.reliefs:
        _ends(context, relief)
        _pressures(context, relief)


def _ends(context: RigContext, relief: Relief) -> None:
    parts = context.parts()
    wetted = [name for name, section in parts.items() if section in _WETTED]
    part = relief.at.partition(".")[0]
    if part not in wetted:
        message = f"{relief.id} cannot stand at {part!r}{nearest(part, wetted)}"
        remedy = f"parts with liquid under pressure: {listed(sorted(wetted))}"
        context.found.error("relief-place", context.at("reliefs", relief.id, "at"), message, remedy)
    takers = [vessel.id for vessel in context.rig.vessels if vessel.role is not VesselRole.SUPPLY]
    if relief.to and relief.to not in takers:
        message = f"{relief.id} cannot let out into {relief.to!r}{nearest(relief.to, takers)}"
        remedy = f'vessels that take liquid: {listed(sorted(takers))}; "" lets out on the floor'
        context.found.error("relief-outlet", context.at("reliefs", relief.id, "to"), message, remedy)


def _pressures(context: RigContext, relief: Relief) -> None:
    if relief.reseat_bar >= relief.set_bar:
        message = f"{relief.id} opens at {relief.set_bar:g} bar and shuts at {relief.reseat_bar:g} bar"
        place = context.at("reliefs", relief.id, "reseat_pressure")
        context.found.error("relief-reseat", place, message, "it must shut at a lower pressure than it opens")
    side = side_of(context.sides, relief.at)
    if side is not None and relief.set_bar >= side.rating_bar:
        message = (
            f"{relief.id} opens at {relief.set_bar:g} bar, but {side.weakest} is rated for {side.rating_bar:g} bar"
        )
        place = context.at("reliefs", relief.id, "set_pressure")
        remedy = f"a set pressure below {side.rating_bar:g} bar"
        context.found.error("relief-above-rating", place, message, remedy)
