"""Each kind of fault in the middle of a rehearsed run: it comes to an end, in numbers, and what had to be seen was."""

from __future__ import annotations

import math
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path

import pytest
from fakes.rehearsals import rehearse_with

from rigd.config import load_rig
from rigd_sim.faults import EFFECTS, fault_kinds

pytestmark = [pytest.mark.slow, pytest.mark.timeout(400)]

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
SWEEP = 'total_flow = { from = "0.8 mL/min", to = "4 mL/min", count = 6, spacing = "geometric" }'
SHORT = 'total_flow = { from = "2 mL/min", to = "4 mL/min", count = 2, spacing = "geometric" }'
FAVOURITES = ("COL", "L-4", "PU-A", "V-C", "CH", "IR", "PT-1", "TT-1", "bottle-A", "flask", "pump-a", "room")
MUST_STOP = {"block": "PRESSURE-HIGH", "stall": "STALL-PU-A", "full-heat": "BED-HOT"}
"""Where the limits of the example rig alone decide, whatever else watches."""


def test_every_kind_of_fault_ends_in_numbers(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    recipe = tmp_path / "short.toml"
    text = RECIPE.read_text(encoding="utf-8")
    assert SWEEP in text
    recipe.write_text(text.replace(SWEEP, SHORT), encoding="utf-8")
    rig = load_rig(RIG)
    jobs = [(k.kind, next(t for t in FAVOURITES if t in EFFECTS[k.kind].targets(rig))) for k in fault_kinds()]
    assert len(jobs) >= 40
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        results = list(pool.map(rehearse_with, *zip(*jobs, strict=True), [str(recipe)] * len(jobs), timeout=300))
    with capsys.disabled():
        print()
        for kind, outcome, _, trips in results:
            print(f"{kind:24} {outcome:8} {', '.join(trips[:3])}")
    for kind, outcome, numbers, trips in results:
        assert outcome in ("done", "tripped", "stopped"), kind
        assert all(math.isfinite(number) for number in numbers), kind
        if kind in MUST_STOP:
            assert trips[:1] == (MUST_STOP[kind],), (kind, trips)
