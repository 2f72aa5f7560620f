"""Damaged bytes on every line at once, over the live shell in virtual time: the rig goes on or stops, by the plant.

One byte in a hundred lost, one flipped, one reply in a hundred doubled: no link bears that, and the rig must stop.
At one in ten thousand a run goes on. What must never happen is a pump that moves unseen.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd import app
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
LINKS = ("bus-1", "bus-2", "chiller-port", "ir-port")
KINDS = ("line-flip", "line-loss", "line-double")
S = 1_000_000_000
LOWEST_RATING_BAR = 20.0


def damaged(size: float, seed: int, until_s: int) -> app.DryRun:
    faults = tuple(FaultSpec(kind, link, onset_s=60.0, magnitude=size) for kind in KINDS for link in LINKS)
    options = DryOptions(limit_ns=until_s * S)
    return app.dry_run(RIG, RECIPE, app.DrySettings(seed=seed, faults=faults, options=options, deep=True))


@pytest.mark.slow
@pytest.mark.parametrize("seed", [1, 2])
def test_bytes_damaged_beyond_use_stop_the_rig(seed: int) -> None:
    done = damaged(0.01, seed, 1200)
    truth = done.plant.truth()
    assert done.result.outcome == "tripped"
    assert [truth[f"delivering:{pump.id}"] for pump in done.program.rig.pumps] == [0.0, 0.0]
    assert max(bar for name, bar in truth.items() if name.startswith("peak-pressure:")) < LOWEST_RATING_BAR


@pytest.mark.slow
def test_one_damaged_byte_in_ten_thousand_is_lived_with() -> None:
    done = damaged(0.0001 / 3, 3, 600)
    trips = [event.text for event in done.result.events if event.kind == "trip"]
    assert not trips
    assert done.result.end_ns > 599 * S
