"""What would not work out: bottles that do not last, vessels that overflow, points that one syringe cannot give."""

from __future__ import annotations

from collections.abc import Mapping

from rigd.logic.conduct.layout import Layout
from rigd.logic.conduct.point_needs import least_mL
from rigd.logic.dispersion import DEVELOPED, settle_volumes_99, undeveloped
from rigd.model.problems import Problem, Severity
from rigd.model.recipe import Point, PointKind
from rigd.model.rig import Vessel, VesselRole

KEPT_BACK = 0.10
"""Part of a bottle that is never planned for: the dip tube does not reach it (common practice, no source)."""


def find_problems(
    layout: Layout, used_mL: Mapping[str, float], collected_mL: float, waste_mL: float
) -> tuple[Problem, ...]:
    """All findings, worst first."""
    found = [
        *_bottles(layout, used_mL),
        *_receivers(layout, collected_mL, waste_mL),
        *(problem for point in layout.recipe.points for problem in _point(layout, point)),
        *_undeveloped(layout),
    ]
    return tuple(sorted(found, key=lambda problem: problem.severity is not Severity.ERROR))


def _bottles(layout: Layout, used_mL: Mapping[str, float]) -> list[Problem]:
    found = []
    for liquid, volume_mL in sorted(used_mL.items()):
        bottles = [v for v in layout.rig.vessels if v.role is VesselRole.SUPPLY and v.liquid == liquid]
        here_mL = sum(bottle.content_mL for bottle in bottles)
        usable_mL = here_mL * (1.0 - KEPT_BACK)
        if volume_mL > usable_mL:
            message = f"the recipe draws {volume_mL:.0f} mL of {liquid}, {usable_mL:.0f} of {here_mL:.0f} mL are usable"
            remedy = f"Fill more {liquid} or plan fewer or smaller points."
            key = f"vessels[{bottles[0].id}].content" if bottles else "vessels"
            found.append(Problem("bottle-short", message, remedy, key=key))
    return found


def _receivers(layout: Layout, collected_mL: float, waste_mL: float) -> list[Problem]:
    collect = layout.recipe.collect
    pairs = ((collect.position, collected_mL, "flask-overflow"), (collect.waste_position, waste_mL, "waste-overflow"))
    found = []
    for position, volume_mL, code in pairs:
        vessel = _behind(layout, position)
        if vessel and vessel.content_mL + volume_mL > 0.95 * vessel.capacity_mL:
            text = f"{volume_mL:.0f} mL go into {vessel.id}, which holds {vessel.capacity_mL:.0f} mL"
            remedy = f"Use a larger {vessel.id} or empty it before the run."
            found.append(Problem(code, text, remedy, key=f"vessels[{vessel.id}].capacity"))
    return found


def _undeveloped(layout: Layout) -> list[Problem]:
    """Tubes whose dispersion is only estimated, at the flows of the recipe, all in one note."""
    lowest: dict[str, float] = {}
    for point in layout.recipe.points:
        for line, number in undeveloped(layout, point).items():
            lowest[line] = min(number, lowest.get(line, number))
    if not lowest:
        return []
    listed = ", ".join(f"{line} {number:.2g}" for line, number in sorted(lowest.items()))
    message = f"dispersion by Taylor and Aris does not hold in {listed} (D tau/R^2 below {DEVELOPED:g}): long tails"
    remedy = "Settling times are estimates; trust the tracer or the signal gate, not the sum of the path."
    worst = min(lowest, key=lambda line: lowest[line])
    return [Problem("dispersion-estimated", message, remedy, Severity.NOTE, key=f"lines[{worst}].bore")]


def _behind(layout: Layout, position: str) -> Vessel | None:
    name = layout.program.drain.get(position, layout.program.drain.get("", ""))
    return next((vessel for vessel in layout.rig.vessels if vessel.id == name), None)


def _point(layout: Layout, point: Point) -> list[Problem]:
    found = []
    for name, flow in point.flows_mL_min.items():
        play = layout.pumps.get(name)
        if play is None or flow <= 0:
            continue
        need_mL = least_mL(layout, point, name, point.kind is not PointKind.BLANK) + play.reserve_mL(flow)
        if not play.dual and need_mL > play.pump.stroke_mL:
            message = (
                f"point {point.id} takes {need_mL:.1f} mL of {name}, its one syringe holds {play.pump.stroke_mL:g} mL"
            )
            remedy = "Collect less, settle for fewer volumes, or use a larger or a second syringe."
            found.append(Problem("syringe-short", message, remedy, key="collect.volume"))
        elif play.dual and need_mL > play.pump.stroke_mL:
            message = (
                f"point {point.id} takes both syringes of {name}, so neither is free to flush with solvent meanwhile"
            )
            remedy = "A stop with a flush may have to become a cut; collect less or use larger syringes."
            found.append(Problem("flush-blocked", message, remedy, Severity.WARNING, key="collect.volume"))
    needed = settle_volumes_99(layout, point)
    if needed > layout.recipe.settle.volumes:
        message = (
            f"point {point.id}: {layout.recipe.settle.volumes:g} volumes are fewer than the {needed:.2f} that a front "
            "takes to 99 % through this path"
        )
        remedy = "Raise settle.volumes; the signal gate alone may be fooled by a slow tail."
        found.append(Problem("settle-short", message, remedy, Severity.WARNING, key="settle.volumes"))
    return found
