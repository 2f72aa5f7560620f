"""A simulated week in one plant: its memory stays what it was."""

from __future__ import annotations

import gc
import os
import sys
from dataclasses import replace
from pathlib import Path

import pytest
from fakes.sim_rigs import S_NS, column_rig, tracer

from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd_sim.faults import EFFECTS
from rigd_sim.plant import RigPlant, layout

DAY_S = 86_400
PAGE = os.sysconf("SC_PAGE_SIZE")


def resident_MB() -> float:
    """Resident memory of this process."""
    gc.collect()
    return int(Path("/proc/self/statm").read_text().split()[1]) * PAGE / 1e6


@pytest.mark.slow
@pytest.mark.timeout(300)
@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="reads /proc")
def test_memory_is_flat_over_a_week(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """Seven days of pumping, refilling and looking at everything: after the first day at most 2 MB more."""
    monkeypatch.setattr(layout, "CELLS_BED", 20)
    rig = column_rig(tracer(1e-3), Packing("resin", True, 0.2, 0.38, 0.3))
    lines = tuple(replace(tube, length_mm=300.0) for tube in rig.lines)
    plant = RigPlant(replace(rig, lines=lines), 1, EFFECTS)
    shown = []
    for _ in range(7):
        for _ in range(4):
            plant.tell("PU", Action.STOP, 0.0)
            plant.tell("PU", Action.FILL, 50.0)
            plant.advance(plant.now_ns + 400 * S_NS)
            plant.tell("PU", Action.DELIVER, 0.06)
            for _ in range(36):
                plant.advance(plant.now_ns + (DAY_S - 1600) // 144 * S_NS)
                plant.truth()
        shown.append(resident_MB())
    with capsys.disabled():
        print("\n  resident memory after each day, MB:", " ".join(f"{mb:.1f}" for mb in shown))
    assert plant.now_ns > 6.9 * DAY_S * S_NS
    assert max(shown[1:]) - shown[0] < 2.0
