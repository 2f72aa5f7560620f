"""Temperatures and pressures of a recipe against the chiller, the interlocks and the chemistry sheet."""

from __future__ import annotations

from collections.abc import Iterable

from rigd.config.checks.cold import check_bath_temperature
from rigd.config.checks.recipe import RecipeContext, trip_limits
from rigd.config.lines import Path


def check_recipe_limits(context: RecipeContext) -> None:
    """All findings about temperatures and pressures."""
    for place, degC in _temperatures(context):
        _chiller(context, place, degC)
        _too_hot(context, place, degC)
        _freezing(context, place, degC)
        check_bath_temperature(context, place, degC)
    _rest_above_freezing(context)
    _leak_test(context)
    _park_above_regulators(context)
    _trips_above_sheet(context)
    _stops_fit_the_chemistry(context)
    if not context.chillers and context.file.sweep is not None:
        message = "no chiller jackets a column of this rig; the temperature of the points is not controlled"
        remedy = "see that it fits the room"
        context.found.warning("temperature-uncontrolled", ("sweep", "temperature"), message, remedy)


def _temperatures(context: RecipeContext) -> Iterable[tuple[Path, float]]:
    file = context.file
    if file.conditioning is not None:
        yield ("conditioning", "temperature"), file.conditioning.temperature
    if file.sweep is not None:
        written = file.sweep.temperature
        if isinstance(written, tuple):
            yield from ((("sweep", "temperature", index), degC) for index, degC in enumerate(written))
        else:
            yield ("sweep", "temperature"), written
    for section in ("flush", "park"):
        table = getattr(file, section)
        if table is not None:
            yield (section, "temperature"), table.temperature
    if file.sheet is not None:
        yield ("sheet", "safe_temperature"), file.sheet.safe_temperature


def _chiller(context: RecipeContext, place: Path, degC: float) -> None:
    for chiller in context.chillers:
        if not chiller.low_degC <= degC <= chiller.high_degC:
            message = f"{degC:g} degC; {chiller.id} holds {chiller.low_degC:g} to {chiller.high_degC:g} degC"
            context.found.error("temperature-out-of-range", place, message, "choose a temperature in its range")


def _too_hot(context: RecipeContext, place: Path, degC: float) -> None:
    sheet = context.file.sheet
    if sheet is not None and degC > sheet.temperature_limit:
        message = f"{degC:g} degC is above the chemistry sheet's limit of {sheet.temperature_limit:g} degC"
        context.found.error("temperature-above-limit", place, message, "lower it; the sheet's signer sets the limit")
    for limit, tag, lock in trip_limits(context.rig, "temperature")[:1]:
        if degC >= limit:
            message = (
                f"{degC:g} degC is not below the limit of interlock {lock} ({tag} above {limit:g} degC): it would trip"
            )
            context.found.error("temperature-above-limit", place, message, "lower the temperature")


def _freezing(context: RecipeContext, place: Path, degC: float) -> None:
    sheet = context.file.sheet
    if sheet is not None and degC <= sheet.freezes_below:
        message = f"{degC:g} degC; by the chemistry sheet the mixture freezes below {sheet.freezes_below:g} degC"
        remedy = "stay above it: a frozen bed is a block"
        context.found.error("freezing", place, message, remedy)


def _rest_above_freezing(context: RecipeContext) -> None:
    sheet = context.file.sheet
    for chiller in context.chillers:
        if sheet is not None and chiller.safe_degC <= sheet.freezes_below:
            message = f"{chiller.id} goes to {chiller.safe_degC:g} degC when the rig is stopped; by the chemistry sheet"
            message += f" the mixture freezes below {sheet.freezes_below:g} degC"
            remedy = "raise the chiller's safe_temperature in the rig file"
            context.found.error("freezing", ("sheet", "freezes_below"), message, remedy)


def _stops_fit_the_chemistry(context: RecipeContext) -> None:
    """What a stop does to this chemistry must be known before the night, not found out in it."""
    sheet = context.file.sheet
    if sheet is None or context.file.switchover is None:
        return
    if not sheet.solvent_compatible:
        message = (
            "the sheet says that the chemistry does not bear the solvent, but every stop but a cut flushes with it"
        )
        remedy = "choose another solvent for the rig, or do not run this chemistry unattended by this program"
        context.found.error("solvent-incompatible", ("sheet", "solvent_compatible"), message, remedy)
    if not sheet.stagnation_safe:
        message = "the sheet says that standing still is not safe, but on over-pressure the pumps are cut all the same"
        remedy = "plan who vents, cools and flushes by hand after a cut, and how fast; a block cannot be pumped through"
        context.found.warning("stagnation-unsafe", ("sheet", "stagnation_safe"), message, remedy)


def _leak_test(context: RecipeContext) -> None:
    leak, sheet = context.file.leak_test, context.file.sheet
    if leak is None:
        return
    place = ("leak_test", "pressure")
    for limit, tag, lock in trip_limits(context.rig, "pressure")[:1]:
        if leak.pressure >= limit:
            message = f"{leak.pressure:g} bar is not below the limit of interlock {lock} ({tag} above {limit:g} bar)"
            context.found.error("leak-test-above-limit", place, message, f"test well below {limit:g} bar")
    if sheet is not None and leak.pressure > sheet.pressure_limit:
        message = f"{leak.pressure:g} bar is above the chemistry sheet's limit of {sheet.pressure_limit:g} bar"
        context.found.error("leak-test-above-limit", place, message, "lower the test pressure")
    if leak.largest_drop >= leak.pressure:
        message = f"a drop of {leak.largest_drop:g} bar from {leak.pressure:g} bar would pass anything"
        context.found.error(
            "range-empty", ("leak_test", "largest_drop"), message, "allow a small part of the pressure only"
        )


def _park_above_regulators(context: RecipeContext) -> None:
    """A back-pressure regulator keeps its set pressure in the path at rest, so less can never be waited for."""
    park = context.file.park
    for regulator in context.rig.regulators:
        if park is not None and park.pressure_max <= regulator.set_bar:
            message = (
                f"{park.pressure_max:g} bar is never reached: {regulator.id} keeps {regulator.set_bar:g} bar at rest"
            )
            remedy = f"allow more than {regulator.set_bar:g} bar, and release the rest by hand before opening a fitting"
            context.found.error("park-below-regulator", ("park", "pressure_max"), message, remedy)


def _trips_above_sheet(context: RecipeContext) -> None:
    """What the sheet allows at most must be held by an interlock of the rig."""
    sheet = context.file.sheet
    if sheet is None:
        return
    for measures, unit, allowed, key in (
        ("pressure", "bar", sheet.pressure_limit, "pressure_limit"),
        ("temperature", "degC", sheet.temperature_limit, "temperature_limit"),
    ):
        limits = trip_limits(context.rig, measures)
        if limits and limits[0][0] > allowed:
            limit, tag, lock = limits[0]
            message = (
                f"the sheet allows {allowed:g} {unit}, but interlock {lock} trips only above {limit:g} {unit} ({tag})"
            )
            remedy = "lower the interlock's limit in the rig file, or have the sheet's limit reviewed by its signer"
            context.found.error("trip-above-sheet", ("sheet", key), message, remedy)
        if not limits and context.file.switchover is not None:
            message = f"the sheet's limit of {allowed:g} {unit} is held by no interlock of this rig"
            remedy = f"add an interlock on {measures} to the rig file"
            context.found.warning("limit-unprotected", ("sheet", key), message, remedy)
