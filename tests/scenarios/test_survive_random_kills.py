"""kill -9 of control, guard and front, and a control that hangs, at moments chosen by chance; ``random_kills.py`` does
many."""

from __future__ import annotations

from pathlib import Path

import pytest
from scenarios.random_kills import play

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]


def test_the_rig_stops_whoever_is_killed_and_goes_on_without_the_front(tmp_path: Path) -> None:
    found = play(4, 3, tmp_path, (5.0, 8.0))
    assert [one["victim"] for one in found] == ["control", "hung", "guard", "front"]
    assert any(one["moved"] for one in found)  # at least one of them was killed while a pump delivered
