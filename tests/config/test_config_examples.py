"""Every file in configs/ loads, without a warning, and is what its name says."""

from __future__ import annotations

import time
from pathlib import Path

import pytest
from fakes.config_files import CONFIGS

from rigd.config import load_pair, load_rig
from rigd.logic.flow_path import flow_path
from rigd.model.recipe import PointKind

PAIRS = {
    "demo-sweep": "two-pump-column",
    "overnight-sweep": "two-pump-column",
    "single-sweep": "two-pump-single",
    "one-pump-sweep": "one-pump",
    "three-pump-sweep": "three-pump-two-columns",
}


@pytest.mark.parametrize("recipe", PAIRS)
def test_an_example_pair_loads_without_a_word(recipe: str) -> None:
    pair = load_pair(CONFIGS / f"rigs/{PAIRS[recipe]}.toml", CONFIGS / f"recipes/{recipe}.toml")

    assert pair.warnings == ()
    assert pair.recipe is not None
    assert (pair.rig.name, pair.recipe.name) == (PAIRS[recipe], recipe)
    assert pair.recipe.points
    assert "invented" in pair.rig.title
    assert pair.rig.chemistry.invented


def test_no_example_is_left_out() -> None:
    assert {path.stem for path in (CONFIGS / "rigs").glob("*.toml")} == set(PAIRS.values())
    assert {path.stem for path in (CONFIGS / "recipes").glob("*.toml")} == set(PAIRS)
    assert [path.stem for path in (CONFIGS / "chemistry").glob("*.toml")] == ["esterification"]


def test_the_rigs_differ_as_their_names_say() -> None:
    rigs = {name: load_rig(CONFIGS / f"rigs/{name}.toml") for name in set(PAIRS.values())}

    assert {name: len(rig.pumps) for name, rig in rigs.items()} == {
        "one-pump": 1, "two-pump-column": 2, "two-pump-single": 2, "three-pump-two-columns": 3,
    }  # fmt: skip
    assert {pump.syringes for pump in rigs["two-pump-single"].pumps} == {1}
    assert {pump.stroke_mL for pump in rigs["two-pump-single"].pumps} == {25.0}
    assert {pump.syringes for pump in rigs["two-pump-column"].pumps} == {2}
    merges = {feed.pump: feed.merge for feed in flow_path(rigs["three-pump-two-columns"]).feeds}
    assert merges == {"PU-A": "TEE", "PU-B": "TEE", "PU-D": "TEE-2"}


def test_the_overnight_recipe_is_one() -> None:
    """Down to 0.1 mL/min, returns, blanks, a permit; 8 h lie within the band that settling volumes alone give."""
    pair = load_pair(CONFIGS / "rigs/two-pump-column.toml", CONFIGS / "recipes/overnight-sweep.toml")
    recipe, path = pair.recipe, flow_path(pair.rig)
    assert recipe is not None
    assert recipe.permit is not None
    assert len(recipe.permit.contacts) == 2
    assert min(point.total_mL_min for point in recipe.points) == pytest.approx(0.1)
    assert {point.kind for point in recipe.points} == set(PointKind)

    settle, collect = recipe.settle, recipe.collect
    moved_mL = [volumes * path.trunk_mL + collect.volume_mL for volumes in (settle.volumes, settle.volumes_max)]
    hours = [sum(volume / point.total_mL_min for point in recipe.points) / 60 for volume in moved_mL]
    assert hours[0] < 8.0 < hours[1]


def test_the_demo_recipe_has_at_least_five_flows() -> None:
    pair = load_pair(CONFIGS / "rigs/two-pump-column.toml", CONFIGS / "recipes/demo-sweep.toml")
    assert pair.recipe is not None
    assert len({point.total_mL_min for point in pair.recipe.points}) >= 5


def test_loading_takes_a_small_part_of_the_budget_of_a_check() -> None:
    """``rigd check`` has 400 ms; the best of five is taken because other work may share the machine."""

    def load_ms() -> float:
        start = time.perf_counter()
        load_pair(CONFIGS / "rigs/two-pump-column.toml", CONFIGS / "recipes/overnight-sweep.toml")
        return 1000 * (time.perf_counter() - start)

    assert min(load_ms() for _ in range(5)) < 150


def test_a_folder_and_an_absent_file_are_told_apart(tmp_path: Path) -> None:
    from rigd.config import read_rig

    assert [p.code for p in read_rig(tmp_path).problems] == ["file-unreadable"]
    assert [p.code for p in read_rig(tmp_path / "none.toml").problems] == ["file-missing"]
    assert [p.code for p in read_rig("nul\0byte").problems] == ["file-unreadable"]
