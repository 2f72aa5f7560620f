"""Whole campaigns through the command: the same whatever does the work, interrupted and taken up, on a cluster."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

pytestmark = [pytest.mark.slow, pytest.mark.timeout(240)]

CONFIGS = Path(__file__).parents[2] / "configs"
SWEEP = 'total_flow = { from = "0.8 mL/min", to = "4 mL/min", count = 6, spacing = "geometric" }'
SHORT = 'total_flow = { from = "3 mL/min", to = "4 mL/min", count = 2, spacing = "geometric" }'
RIGD = [sys.executable, "-m", "rigd"]


def campaign(folder: Path, nights: int) -> Path:
    recipe = (CONFIGS / "recipes" / "demo-sweep.toml").read_text(encoding="utf-8")
    assert SWEEP in recipe
    (folder / "short.toml").write_text(recipe.replace(SWEEP, SHORT), encoding="utf-8")
    path = folder / "nights.toml"
    path.write_text(
        f"""schema = "rigd-nights-1"
name = "short"
rig = "{CONFIGS / "rigs" / "two-pump-column.toml"}"
recipe = "short.toml"
nights = {nights}
[[vary]]
what = "rig.simulation.ambient"
uniform = ["18 degC", "28 degC"]
[[faults]]
kind = "block"
target = "L-4"
chance = 0.5
at = ["13 min", "15 min"]
""",
        encoding="utf-8",
    )
    return path


def run(path: Path, out: Path, *more: str, code: int = 0) -> dict[str, Any]:
    done = subprocess.run(
        [*RIGD, "nights", str(path), "--out", str(out), "--json", *more], capture_output=True, text=True
    )
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr
    found: dict[str, Any] = json.loads(done.stdout)
    return found


def test_one_worker_and_two_give_the_same_nights(tmp_path: Path) -> None:
    path = campaign(tmp_path, 4)
    one = run(path, tmp_path / "one", "--workers", "1")
    two = run(path, tmp_path / "two", "--workers", "2")
    assert one["digests"] == two["digests"]
    assert len(set(one["digests"].values())) == 4
    assert one["ends"] == two["ends"]
    assert 0 < one["finishes"]["hits"] < 4
    assert ["first-out PRESSURE-HIGH", 4 - one["finishes"]["hits"]] in one["ends"]
    assert (tmp_path / "one" / "nights.parquet").exists()
    page = (tmp_path / "one" / "nights.html").read_text(encoding="utf-8")
    assert "SIMULATED" in page
    assert "src=" not in page
    assert 'href="http' not in page


def test_an_interrupt_keeps_what_is_done_and_the_command_goes_on(tmp_path: Path) -> None:
    path, out = campaign(tmp_path, 6), tmp_path / "out"
    going = subprocess.Popen(
        [*RIGD, "nights", str(path), "--out", str(out), "--workers", "2"],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True,
    )  # fmt: skip
    deadline = time.monotonic() + 100.0
    while time.monotonic() < deadline:
        lines = (out / "nights.jsonl").read_text().splitlines() if (out / "nights.jsonl").exists() else []
        if len(lines) >= 3:
            break
        time.sleep(0.1)
    os.killpg(going.pid, signal.SIGINT)
    said, complained = going.communicate(timeout=60.0)
    assert going.returncode == 1, complained
    assert "Traceback" not in complained
    assert "goes on from here" in said
    kept = len((out / "nights.jsonl").read_text().splitlines()) - 1
    assert 2 <= kept < 6
    whole = run(path, out)
    assert whole["finishes"]["nights"] == 6
    assert all(whole["digests"].values())


def test_a_cluster_gives_the_same_nights(tmp_path: Path) -> None:
    from distributed import LocalCluster

    path = campaign(tmp_path, 2)
    with LocalCluster(n_workers=1, threads_per_worker=1, processes=True, dashboard_address=None) as cluster:
        there = run(path, tmp_path / "there", "--cluster", cluster.scheduler_address)
    here = run(path, tmp_path / "here")
    assert there["digests"] == here["digests"]


def test_no_cluster_is_said(tmp_path: Path) -> None:
    path = campaign(tmp_path, 1)
    done = subprocess.run(
        [*RIGD, "nights", str(path), "--out", str(tmp_path / "out"), "--cluster", "tcp://127.0.0.1:9"],
        capture_output=True, text=True,
    )  # fmt: skip
    assert done.returncode != 0
    assert "no cluster answers" in done.stderr
    assert "Traceback" not in done.stderr
