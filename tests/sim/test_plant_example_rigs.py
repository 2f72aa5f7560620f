"""Every example rig can be simulated: all pumps run, all valves move, all sensors read, nothing is lost."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rigd.config import load_rig
from rigd.model.orders import Action
from rigd.model.rig import TagKind
from rigd_sim.faults import EFFECTS
from rigd_sim.plant import RigPlant

RIGS = sorted((Path(__file__).parents[2] / "configs" / "rigs").glob("*.toml"))
S_NS = 1_000_000_000


@pytest.mark.parametrize("path", RIGS, ids=[p.stem for p in RIGS])
def test_example_rig_runs(path: Path) -> None:
    """Fill, deliver, heat and switch for twenty minutes; balances close to 1e-9."""
    rig = load_rig(path)
    plant = RigPlant(rig, 1, EFFECTS)
    start = plant.contents.totals()
    for chiller in rig.chillers:
        assert plant.tell(chiller.id, Action.SET_TEMPERATURE, 50.0) == ""
        plant.tell(chiller.id, Action.CIRCULATE, 1.0)
    for pump in rig.pumps:
        assert plant.tell(pump.id, Action.FILL, pump.stroke_mL) == ""
    plant.advance(90 * S_NS)
    for pump in rig.pumps:
        assert plant.tell(pump.id, Action.DELIVER, 0.2) == ""
    for valve in rig.valves[:-1]:
        plant.tell(valve.id, Action.MOVE, 1.0)
    for minute in range(20):
        plant.advance((90 + 60 * (minute + 1)) * S_NS)
    truth = plant.truth()
    total = 0.2 * len(rig.pumps)
    last = next(line.id for line in rig.lines if line.end.part == rig.valves[-1].id and not line.end.port)
    assert truth[f"flow:{last}"] == pytest.approx(total, rel=0.01)
    for tag in rig.tags:
        if tag.kind is TagKind.MEASURED and tag.device:
            reading = plant.read(tag.device, [tag.channel])[0]
            assert reading.fault == ""
            assert np.isfinite(reading.value)
    plant.settle()
    end = plant.contents.totals()
    liquid = (end[-1] - end[plant.contents.gas]) / (start[-1] - start[plant.contents.gas])
    assert liquid == pytest.approx(1.0, abs=1e-9)
    assert end[plant.contents.gas] == 0.0
