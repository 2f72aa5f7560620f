"""Is a bed warmer than bath, room and chemistry together can make it?

A bed cannot be warmer than the warmest of jacket, bath and room by more than the adiabatic rise of its chemistry (the
sheet's; none without a sheet, when only solvent flows). A bath that cools leaves the bed behind: what was warmest is
forgotten slowly. Accumulation (a bed colder than its heat should make it) is not seen this way: with an ordinary
jacket the difference is lost in the noise.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from rigd.logic.early.path import column_tags
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition, TagKind

FORGET_K_S = 0.02
"""The warmest that was is forgotten by 1.2 K/min (proposal; no source)."""


@dataclass(frozen=True, slots=True)
class Bed:
    """A temperature in a bed, and the tags of what warms it from outside."""

    tag: str
    around: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Warmth:
    """The warmest of bath, jacket and room lately [degC], and when that was looked at."""

    warmest_degC: float
    t_ns: int


def beds(rig: RigDefinition) -> tuple[Bed, ...]:
    """Every temperature that is measured inside a packed column."""
    found = []
    for column in rig.columns:
        places = column_tags(rig, column)
        measured = {tag.id for tag in rig.tags if tag.kind is TagKind.MEASURED and not tag.at.endswith(".jacket")}
        around = tuple(tag for tag in places if tag not in measured)
        found += [Bed(tag, around) for tag in places if tag in measured]
    return tuple(found)


def rise_K(recipe: Recipe | None) -> float:
    """What the chemistry can add at most [K]: the adiabatic rise of its sheet."""
    return 0.0 if recipe is None or recipe.sheet is None else recipe.sheet.adiabatic_rise_K


def unexplained_K(
    bed: Bed, known: Warmth | None, value: Callable[[str], float | None], room_degC: float, rise: float, now_ns: int
) -> tuple[Warmth | None, float | None]:
    """How much warmer the bed is than can be explained [K]; ``None`` while nothing around it can be read."""
    degC = value(bed.tag)
    around = [found for tag in bed.around if (found := value(tag)) is not None]
    if degC is None or (bed.around and not around):
        return known, None
    warmest = max(room_degC, *around) if around else room_degC
    if known is not None:
        warmest = max(warmest, known.warmest_degC - FORGET_K_S * (now_ns - known.t_ns) / 1e9)
    return Warmth(warmest, now_ns), degC - warmest - rise
