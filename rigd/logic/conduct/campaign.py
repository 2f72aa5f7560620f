"""The recipe laid out as a list of phases, with the changes of liquid between points made explicit."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from rigd.logic.program import Program
from rigd.model.recipe import Point, PointKind


class PhaseKind(StrEnum):
    """The kinds of phase; ``RESTART`` and holds happen between them and are never planned."""

    PRIME = "prime"
    CONDITIONING = "conditioning"
    LEAK_TEST = "leak test"
    SWITCHOVER = "switchover"
    POINT = "point"
    FLUSH = "flush"
    PARK = "park"
    HOLD = "hold"
    RESTART = "restart"


@dataclass(frozen=True, slots=True)
class PhaseSpec:
    """One phase. ``reagent`` tells what it delivers; ``slow`` scales the flows of a switchover after a hold."""

    kind: PhaseKind
    id: str
    label: str
    reagent: bool = False
    point: Point | None = None
    slow: float = 1.0


def campaign(program: Program) -> tuple[PhaseSpec, ...]:
    """All phases in order. Points collected in an earlier run are left out; everything before them is done again."""
    recipe = program.recipe
    points = tuple(point for point in recipe.points if point.id not in program.options.collected)
    phases = [*_before(program), *_points(program, points)] if points or not recipe.points else []
    flush = PhaseSpec(PhaseKind.FLUSH, "flush", "Flush with solvent")
    return (*phases, flush, PhaseSpec(PhaseKind.PARK, "park", "Park"))


def switchover(name: str, reagent: bool, point: Point | None = None, slow: float = 1.0) -> PhaseSpec:
    """A change of liquid; ``point`` is the one that follows, whose ratio of flows is used."""
    label = "Switch over to reagent" if reagent else "Switch over to solvent"
    return PhaseSpec(PhaseKind.SWITCHOVER, name, label, reagent, point, slow)


def _before(program: Program) -> list[PhaseSpec]:
    recipe = program.recipe
    planned = (
        (recipe.prime, PhaseSpec(PhaseKind.PRIME, "prime", "Prime all lines")),
        (recipe.conditioning, PhaseSpec(PhaseKind.CONDITIONING, "conditioning", "Condition the bed")),
        (recipe.leak_test, PhaseSpec(PhaseKind.LEAK_TEST, "leak-test", "Leak test")),
    )
    return [spec for wanted, spec in planned if wanted is not None]


def _points(program: Program, points: tuple[Point, ...]) -> list[PhaseSpec]:
    phases: list[PhaseSpec] = []
    on_reagent = False
    for point in points:
        reagent = not program.recipe.solvent_only and point.kind is not PointKind.BLANK
        if reagent is not on_reagent:
            name = "switchover" if reagent else "to-solvent"
            phases.append(switchover(f"{name}-{point.id}" if phases else name, reagent, point))
            on_reagent = reagent
        phases.append(PhaseSpec(PhaseKind.POINT, f"point-{point.id}", _label(point), reagent, point))
    return phases


def _label(point: Point) -> str:
    names = {PointKind.POINT: "Point", PointKind.RETURN: "Return point", PointKind.BLANK: "Solvent blank"}
    return f"{names[point.kind]} {point.id}: {point.total_mL_min:.3g} mL/min at {point.temperature_degC:g} degC"
