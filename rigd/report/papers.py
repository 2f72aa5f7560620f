"""The two papers of an unattended run: the sign for the door and the one-page shutdown card, for screen and printer.

What a sign and a card should tell is what university rules for unattended work ask (named in the project's references):
nature of the work, chemicals, hazards, two people and their telephone numbers, what happens when a utility fails, and
a shutdown in at most three marked steps. The emergency stop on the card is the hard-wired one; this program has none.
"""

from __future__ import annotations

from dataclasses import dataclass

from jinja2 import Environment, PackageLoader, StrictUndefined

from rigd.model.orders import Stop
from rigd.model.protection import ConditionKind
from rigd.model.recipe import Recipe
from rigd.model.rig import LiquidRole, RigDefinition

COMMANDS = ("rigd stop   (reagents off, flush with solvent, then rest)", "rigd cut   (everything stops at once)")


@dataclass(frozen=True, slots=True)
class Paper:
    """One page: heading, lines under titles, and the large steps of a shutdown card."""

    heading: str
    title: str
    parts: tuple[tuple[str, tuple[str, ...]], ...]
    steps: tuple[str, ...] = ()


def door_sign(rig: RigDefinition, recipe: Recipe, *, simulated: bool) -> Paper:
    """For the door and the hood."""
    permit, sheet = recipe.permit, recipe.sheet
    parts = (
        ("What goes on", (recipe.title, rig.title, *((permit.place,) if permit and permit.place else ()))),
        ("Chemicals", _chemicals(rig, reagents=not recipe.solvent_only)),
        ("Hazards", (*(permit.hazards if permit else ()), *_hazards(rig, recipe))),
        ("Call", permit.contacts if permit else ("NOBODY IS NAMED: not valid",)),
        (
            "Approved by",
            (f"{permit.approved_by}, permit {permit.number}, until {permit.end_utc}",) if permit else ("nobody",),
        ),
        ("Signed for the chemistry", (sheet.signed_by if sheet else "nobody: solvent only",)),
        ("Leave on", ("the light, the fume extraction and the chiller",)),
    )
    return Paper("UNATTENDED EXPERIMENT", _marked(rig, simulated), parts)


def shutdown_card(rig: RigDefinition, recipe: Recipe, *, simulated: bool) -> Paper:
    """For the rig itself: what anybody can do, and what not to do."""
    permit = recipe.permit
    steps = permit.shutdown if permit and permit.shutdown else _steps(rig)
    parts = (
        ("Call", permit.contacts if permit else ("NOBODY IS NAMED: not valid",)),
        ("Do not", _do_not(rig, recipe)),
        ("What the rig does by itself", _by_itself(rig)),
        ("At the computer", COMMANDS),
    )
    return Paper("SHUT DOWN", _marked(rig, simulated), parts, tuple(steps))


def _approval(recipe: Recipe) -> str:
    permit = recipe.permit
    return f"{permit.approved_by}, permit {permit.number}, until {permit.end_utc}" if permit else "nobody: not valid"


def page(paper: Paper) -> str:
    """A paper as one HTML file for the printer."""
    environment = Environment(
        loader=PackageLoader("rigd.report"), autoescape=True, undefined=StrictUndefined, trim_blocks=True
    )
    return environment.get_template("paper.html.j2").render(paper=paper)


def _marked(rig: RigDefinition, simulated: bool) -> str:
    return f"{rig.name} (SIMULATED: no liquid flows)" if simulated else rig.name


def _chemicals(rig: RigDefinition, *, reagents: bool) -> tuple[str, ...]:
    there = {vessel.liquid: vessel.content_mL for vessel in rig.vessels if vessel.liquid}
    shown = [liquid for liquid in rig.liquids if reagents or liquid.role is LiquidRole.SOLVENT]
    return tuple(f"{liquid.name} ({liquid.role}), {there.get(liquid.id, 0.0):g} mL" for liquid in shown)


def _hazards(rig: RigDefinition, recipe: Recipe) -> tuple[str, ...]:
    found = [f"pressure up to {limit:g} bar" for limit in [_highest(rig, "pressure")] if limit]
    hottest = max((point.temperature_degC for point in recipe.points), default=None)
    if hottest is not None:
        found.append(f"column and bath at up to {hottest:g} °C")
    sheet = recipe.sheet
    if sheet is not None:
        found.append(f"adiabatic temperature rise {sheet.adiabatic_rise_K:g} K")
        found += ["gas is evolved"] if sheet.gas_evolution else []
        found += [] if sheet.stagnation_safe else ["the mixture is NOT safe when it stands still in the bed"]
    return tuple(found)


def _highest(rig: RigDefinition, measures: str) -> float:
    tags = {tag.id for tag in rig.tags if tag.measures == measures}
    causes = [cause for lock in rig.interlocks for cause in lock.causes if cause.kind is ConditionKind.HIGH]
    return min((cause.limit for cause in causes if cause.tag in tags), default=0.0)


def _steps(rig: RigDefinition) -> tuple[str, ...]:
    pumps = ", ".join(pump.id for pump in rig.pumps)
    return (
        "Press the hard-wired emergency stop of the rig.",
        f"If a pump still runs, pull the marked mains plug of the pumps ({pumps}).",
        "Leave everything else as it is, go away from it and call.",
    )


def _do_not(rig: RigDefinition, recipe: Recipe) -> tuple[str, ...]:
    limit = _highest(rig, "pressure")
    found = [f"open a fitting: up to {limit:g} bar may stand in the lines" if limit else "open a fitting"]
    found.append("start anything again: only the people named here do that")
    if rig.chillers:
        found.append("switch the chiller off: a bed that makes heat needs it")
    if recipe.sheet is not None and not recipe.sheet.stagnation_safe:
        found.append("leave a stopped rig alone for long: the mixture is NOT safe when it stands still; call at once")
    return tuple(found)


def _by_itself(rig: RigDefinition) -> tuple[str, ...]:
    """What follows the loss of each utility, from the rest states and the rules that are always there."""
    rests = ", ".join(f"{valve.id} to {valve.rest}" for valve in rig.valves)
    cuts = sum(lock.stop is Stop.CUT for lock in rig.interlocks)
    return (
        "mains power lost: pumps stand still; nothing starts by itself when it is back",
        f"a limit is broken: {cuts} rules stop all pumps at once, the others flush with solvent first; {rests}",
        "chiller lost: reagents off, flush with solvent, then rest",
        "computer lost: a second process stops every pump, if the computer still has power",
        "network lost: nothing changes here, and nobody is told",
    )
