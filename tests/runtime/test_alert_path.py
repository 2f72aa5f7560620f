"""A run with nobody there ends when nobody can be alerted for longer than the permit allows."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from rigd.config import load_pair
from rigd.model.rig import AlertChannel
from rigd.runtime.alert_path import AlertPath, alert_path

CONFIGS = Path(__file__).parents[2] / "configs"


class Wall:
    def __init__(self) -> None:
        self.s = 100.0

    def __call__(self) -> int:
        return int(self.s * 1e9)


def test_down_for_longer_than_allowed_is_a_fault_until_somebody_can_be_alerted_again() -> None:
    wall = Wall()
    path = AlertPath(600.0, wall)
    path.heard("")
    for _ in range(600):
        wall.s += 1
        path.heard("sms has not taken 'TRIP'")
        assert path.fault() == ""
    wall.s += 1
    path.heard("sms has not taken 'TRIP'")
    assert path.fault() == "nobody could be alerted for 601 s, the permit allows 600 s: sms has not taken 'TRIP'"
    path.heard("")
    assert path.fault() == ""


def test_a_front_that_is_gone_is_a_path_that_is_down() -> None:
    wall = Wall()
    path = AlertPath(60.0, wall)
    path.heard("")
    wall.s += 59
    assert path.fault() == ""
    wall.s += 2
    assert "has gone silent" in path.fault()


@pytest.mark.parametrize(("unattended", "priority", "watched"), [(True, 2, True), (False, 2, False), (True, 1, False)])
def test_it_is_watched_only_without_people_and_with_a_channel_that_wakes(
    unattended: bool, priority: int, watched: bool
) -> None:
    pair = load_pair(CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "overnight-sweep.toml")
    assert pair.recipe is not None
    assert pair.recipe.permit is not None
    recipe = replace(pair.recipe, permit=replace(pair.recipe.permit, alerts_down_s=5.0))
    rig = replace(pair.rig, outside=replace(pair.rig.outside, channels=(AlertChannel("one", "json://x", priority),)))
    wall = Wall()
    path = alert_path(rig, recipe, unattended, wall)
    wall.s += 1000
    assert bool(path.fault()) is watched
