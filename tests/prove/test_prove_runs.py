"""The proof on the example rig: it holds what it should, and finds a protection that was made too weak."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

CONFIGS = Path(__file__).parents[2] / "configs"
SWEEP = 'total_flow = { from = "0.8 mL/min", to = "4 mL/min", count = 6, spacing = "geometric" }'
SHORT = 'total_flow = { from = "3 mL/min", to = "4 mL/min", count = 2, spacing = "geometric" }'
RIGD = (sys.executable, "-m", "rigd")
KINDS = ("--only", "block", "--only", "stall", "--only", "full-heat", "--only", "slip")


def prove(folder: Path, rig: str, *more: str) -> tuple[int, dict[str, Any]]:
    recipe = (CONFIGS / "recipes" / "demo-sweep.toml").read_text(encoding="utf-8")
    assert SWEEP in recipe
    (folder / "recipe.toml").write_text(recipe.replace(SWEEP, SHORT), encoding="utf-8")
    (folder / "rig.toml").write_text(rig.replace("../chemistry/", f"{CONFIGS}/chemistry/"), encoding="utf-8")
    done = subprocess.run(
        [*RIGD, "prove", "rig.toml", "recipe.toml", "--json", "--quick", "--workers", "2", *more],
        cwd=folder, capture_output=True, text=True,
    )  # fmt: skip
    assert "Traceback" not in done.stderr, done.stderr
    found: dict[str, Any] = json.loads(done.stdout)
    return done.returncode, found


def test_example_rig_holds_and_says_what_it_cannot_see(tmp_path: Path) -> None:
    rig = (CONFIGS / "rigs" / "two-pump-column.toml").read_text(encoding="utf-8")
    code, facts = prove(tmp_path, rig, *KINDS, "--targets", "12")
    assert facts["missed"] == []
    assert code == 0
    assert facts["spurious"] == []
    assert facts["largest_peak"] < 1.0
    assert {row["kind"] for row in facts["unseen"]} >= {"slip"}
    stops = {cell["text"].split()[0] for row in facts["matrix"] if row["kind"] == "stall" for cell in row["cells"]}
    assert "cut" in stops
    page = (tmp_path / "proof.html").read_text(encoding="utf-8")
    assert "SIMULATED" in page
    assert "not a safety function" in page


def test_a_protection_that_is_too_slow_is_found_out(tmp_path: Path) -> None:
    """A trip that waits a minute and pumps with too much force: a block passes the rating, and the proof says so."""
    rig = (CONFIGS / "rigs" / "two-pump-column.toml").read_text(encoding="utf-8")
    assert rig.count('delay = "200 ms"') >= 1
    code, facts = prove(
        tmp_path,
        rig.replace('delay = "200 ms"', 'delay = "60 s"').replace('force_limit = "130 N"', 'force_limit = "400 N"'),
        "--only", "block", "--targets", "4",
    )  # fmt: skip
    assert code == 1
    assert any("of its rating" in night["why"] for night in facts["missed"])
