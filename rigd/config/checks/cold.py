"""Cold baths: water that condenses from the room, coolant and solvent that freeze."""

from __future__ import annotations

import math

from rigd.config.checks.context import RigContext
from rigd.config.checks.recipe import RecipeContext
from rigd.config.findings import Findings
from rigd.config.lines import Path
from rigd.model.rig import Chiller, RigDefinition

MELTING_DEGC = {
    "water": 0.0,
    "methanol": -98.0,
    "ethanol": -114.1,
    "acetonitrile": -46.5,
    "toluene": -93.9,
    "THF": -108.0,
    "ethyl acetate": -84.0,
    "dichloromethane": -95.0,
    "chloroform": -63.0,
}
"""Melting points at one atmosphere, as tabulated in the open library ``chemicals`` 1.5.2."""
MARGIN_K = 5.0
"""A bath, its evaporator above all, is colder somewhere than its set-point (common practice, no source)."""


def dew_point_degC(room_degC: float, humidity: float) -> float:
    """Dew point over water [degC] of air at ``room_degC`` with relative ``humidity`` (0..1], -45 to 60 degC.

    Magnus form e = 6.112 hPa exp(17.62 t/(243.12 + t)): D. Sonntag, Z. Meteorol. 40 (1990) 340-344; WMO-No. 8, annex
    4.B.
    """
    exponent = math.log(max(humidity, 1e-6)) + 17.62 * room_degC / (243.12 + room_degC)
    return 243.12 * exponent / (17.62 - exponent)


def check_rest_temperature(context: RigContext) -> None:
    """Where the chillers go when the rig is stopped."""
    for chiller in context.rig.chillers:
        place = context.at("chillers", chiller.id, "safe_temperature")
        _judge(context.found, context.rig, chiller, place, chiller.safe_degC)


def check_bath_temperature(context: RecipeContext, place: Path, degC: float) -> None:
    """One temperature of a recipe."""
    for chiller in context.chillers:
        _judge(context.found, context.rig, chiller, place, degC)


def _judge(found: Findings, rig: RigDefinition, chiller: Chiller, place: Path, degC: float) -> None:
    """A temperature that the bath cannot have is another check's business."""
    if not chiller.low_degC <= degC <= chiller.high_degC:
        return
    room, humidity = rig.simulation.ambient_degC, rig.simulation.humidity
    dew = dew_point_degC(room, humidity)
    if degC < dew:
        air = f"{dew:.1f} degC at {room:g} degC and {humidity:.0%}"
        message = f"{degC:g} degC is below the dew point of the room, {air}"
        remedy = "water will run down hoses, column and cell: insulate them, keep it off electrics and floor sensors"
        found.warning("bath-below-dew-point", place, message, remedy)
    if degC <= chiller.coolant_freezes_degC + MARGIN_K:
        message = f"{degC:g} degC; the coolant of {chiller.id} freezes at {chiller.coolant_freezes_degC:g} degC"
        remedy = f"stay {MARGIN_K:g} K above it, or fill another coolant and write its coolant_freezes in the rig file"
        found.warning("coolant-freezes", place, message, remedy)
    for name in sorted({liquid.properties for liquid in rig.liquids}):
        if name in MELTING_DEGC and degC <= MELTING_DEGC[name]:
            message = f"{degC:g} degC; {name} freezes at {MELTING_DEGC[name]:g} degC"
            found.error("solvent-freezes", place, message, "stay above it: a frozen bed is a block")
