"""Checked recipe tables -> ``Recipe``. Only for a recipe without errors."""

from __future__ import annotations

from rigd.config.conditions import DIMENSIONS
from rigd.config.files import RecipeFile
from rigd.config.quantity import read_quantity
from rigd.config.recipe_tables import CollectTable, SettleTable
from rigd.config.rule_tables import difference
from rigd.model.recipe import Collect, Point, Ramp, Recipe, Settle
from rigd.model.rig import RigDefinition

NO_SETTLE = Settle(volumes=0.0, volumes_max=1.0, signal="", tolerance=0.0, persistence=1, window=3)
NO_COLLECT = Collect(volume_mL=0.0)
"""Stand for the sections that a recipe without points does not have; nothing looks at them then."""


def compile_recipe(file: RecipeFile, points: tuple[Point, ...], rig: RigDefinition, digest: str) -> Recipe:
    """The recipe that a file describes, with its points."""
    return Recipe(
        name=file.name,
        title=file.title,
        checklist=tuple(item.value() for item in file.checklist),
        prime=file.prime.value() if file.prime else None,
        conditioning=file.conditioning.value() if file.conditioning else None,
        leak_test=file.leak_test.value() if file.leak_test else None,
        switchover=file.switchover.value() if file.switchover else None,
        points=points,
        settle=_settle(file.settle, rig) if file.settle else NO_SETTLE,
        collect=_collect(file.collect) if file.collect else NO_COLLECT,
        flush=file.flush.value(),
        park=file.park.value(),
        ramp=file.ramp.value() if file.ramp else Ramp(),
        sheet=file.sheet.value() if file.sheet else None,
        permit=file.permit.value() if file.permit else None,
        refill_below_mL=file.refill_below,
        seed=file.sweep.seed if file.sweep else 0,
        digest=digest,
        references=file.references.value() if file.references else None,
    )


def _settle(table: SettleTable, rig: RigDefinition) -> Settle:
    unit = rig.tag(table.signal).unit
    return Settle(
        volumes=table.volumes,
        volumes_max=table.volumes_max,
        signal=table.signal,
        tolerance=read_quantity(table.tolerance, difference(DIMENSIONS[unit]), "positive"),
        persistence=table.persistence,
        window=table.window,
        on_timeout=table.on_timeout,
    )


def _collect(table: CollectTable) -> Collect:
    return Collect(table.volume, table.position, table.waste_position)
