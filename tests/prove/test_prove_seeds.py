"""Nights that a proof of the example once called missed: each with its seed, its fault and its moment."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd.ports.plant import FaultSpec
from rigd.prove.branch import Job, Moment, run_job
from rigd.prove.judge import HELD

pytestmark = [pytest.mark.slow, pytest.mark.timeout(120)]

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
BUBBLE = FaultSpec("bubble", "COL", magnitude=0.5)
LEAK = FaultSpec("leak", "L-4", magnitude=1.0)


def test_nights_in_the_leak_test_hold() -> None:
    """A bubble in the shut path truly passes the limit, so the cut is right; a leak there ends in a hold at rest."""
    moment = Moment("leak-test", 598_000_000_000)
    bubble, leak = run_job(Job(str(RIG), str(RECIPE), 1, (BUBBLE, LEAK), (moment,), 2_700_000_000_000))
    assert (bubble.verdict, bubble.stop, bubble.first_out) == (HELD, "cut", "PRESSURE-HIGH"), bubble
    assert (leak.verdict, leak.stop) == (HELD, "hold"), leak
