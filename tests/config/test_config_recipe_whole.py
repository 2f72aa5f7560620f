"""A recipe as a whole: what may be left out, what single syringes need, and problems of several files together."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import RECIPE, RIG, SINGLE, block, edited, problems_of, write

from rigd.config import load_pair, load_recipe, load_rig
from rigd.model.errors import ConfigError
from rigd.model.problems import Severity

FLOWS = 'total_flow = { from = "0.8 mL/min", to = "4 mL/min", count = 6, spacing = "geometric" }'
SHEET = RECIPE[RECIPE.index("[sheet]") : RECIPE.index("[[checklist]]")]
SWITCHOVER = RECIPE[RECIPE.index("[switchover]") : RECIPE.index("[sweep]")]
SWEEP = RECIPE[RECIPE.index("[sweep]") : RECIPE.index("[settle]")]
SETTLE = RECIPE[RECIPE.index("[settle]") : RECIPE.index("[collect]")]
COLLECT = RECIPE[RECIPE.index("[collect]") : RECIPE.index("[flush]")]


def test_a_single_syringe_must_hold_a_whole_fraction(tmp_path: Path) -> None:
    """25 mL stroke less 0.1 mL dead volume, half of each fraction: 49.8 mL fit, 50 mL do not."""
    few = edited(RECIPE, (FLOWS, 'total_flow = "2 mL/min"'))

    assert not problems_of(tmp_path, rig=SINGLE, recipe=edited(few, ('volume = "0.5 mL"', 'volume = "49.8 mL"')))
    problems = problems_of(tmp_path, rig=SINGLE, recipe=edited(few, ('volume = "0.5 mL"', 'volume = "50 mL"')))
    assert {(problem.code, problem.key) for problem in problems} == {("collect-above-stroke", "collect.volume")}


def test_without_an_outlet_valve_there_is_no_position(tmp_path: Path) -> None:
    rig = edited(
        RIG,
        *((block(RIG, name), "") for name in ("V-C", "valve-c", "L-5", "L-6", "flask", "FLASK-NEARLY-FULL")),
        (block(RIG, "L-4"), block(RIG, "L-4").replace('to = "V-C"', 'to = "waste"')),
    )
    problems = [problem for problem in problems_of(tmp_path, rig=rig) if problem.severity is Severity.ERROR]

    assert [(problem.code, problem.key) for problem in problems] == [
        ("position-unknown", "leak_test.shut_position"),
        ("position-unknown", "collect.position"),
        ("position-unknown", "collect.waste_position"),
    ]
    plugged = edited(RECIPE, ('fill_time_max = "3 min"', 'fill_time_max = "3 min"\nshut_position = ""'))
    problems = [p for p in problems_of(tmp_path, rig=rig, recipe=plugged) if p.severity is Severity.ERROR]
    assert [problem.key for problem in problems] == ["collect.position", "collect.waste_position"]


def test_a_solvent_recipe_needs_no_sheet(tmp_path: Path) -> None:
    recipe = edited(RECIPE, (SHEET, ""), (SWITCHOVER, ""))
    rig_path, recipe_path = write(tmp_path, recipe=recipe)
    pair = load_pair(rig_path, recipe_path)

    assert pair.recipe is not None
    assert pair.recipe.solvent_only
    assert {point.kind.value for point in pair.recipe.points} == {"blank"}


def test_a_recipe_may_only_prime_and_park(tmp_path: Path) -> None:
    recipe = edited(RECIPE, (SHEET, ""), (SWITCHOVER, ""), (SWEEP, ""), (SETTLE, ""), (COLLECT, ""))
    rig_path, recipe_path = write(tmp_path, recipe=recipe)
    loaded = load_recipe(recipe_path, load_rig(rig_path))

    assert loaded.points == ()
    assert loaded.collect.volume_mL == 0.0
    assert loaded.prime is not None


def test_a_missing_flush_or_park_is_one_finding_each(tmp_path: Path) -> None:
    start = RECIPE.index("[flush]")
    problems = problems_of(tmp_path, recipe=RECIPE[:start])

    assert [(problem.code, problem.key) for problem in problems] == [("key-missing", "flush"), ("key-missing", "park")]


def test_problems_of_both_files_come_together(tmp_path: Path) -> None:
    """A broken rig does not hide that the recipe is broken too; and is not blamed on the recipe."""
    rig = edited(RIG, ('scan = "100 ms"', 'scan = "100"'), ('bore = "6.6 mm"', 'bor = "6.6 mm"'))
    recipe = edited(RECIPE, ('volume = "0.5 mL"', 'volume = "0.5"'), ("IR.conversion", "PT-1"))
    problems = problems_of(tmp_path, rig=rig, recipe=recipe)

    files = [Path(problem.file).name for problem in problems]
    assert files == ["rig.toml", "rig.toml", "rig.toml", "recipe.toml"]
    assert problems[-1].code == "unit-missing"


def test_the_files_in_the_wrong_order_are_named_as_such(tmp_path: Path) -> None:
    rig_path, recipe_path = write(tmp_path)
    with pytest.raises(ConfigError) as caught:
        load_pair(recipe_path, rig_path)

    assert [problem.code for problem in caught.value.problems] == ["file-kind-wrong", "file-kind-wrong"]
    assert "a recipe file" in caught.value.problems[0].message


def test_a_missing_chemistry_is_told_at_the_key_that_names_it(tmp_path: Path) -> None:
    problems = problems_of(tmp_path, rig=edited(RIG, ("chemistry/esterification", "chemistry/esterificaton")))

    assert [(problem.code, problem.key) for problem in problems] == [("chemistry-file-missing", "chemistry")]
