"""Ctrl-C and SIGTERM to ``rigd run`` while it still starts: an orderly end, a report, no traceback."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from fakes.sim_process import CONFIGS, TWO_PUMPS, sim_process

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.places import run_folders

pytestmark = [pytest.mark.slow, pytest.mark.timeout(120)]

RECIPE = CONFIGS / "recipes" / "demo-sweep.toml"
PACE = 20.0


@pytest.mark.parametrize(("number", "wait_s"), [(signal.SIGTERM, 0.0), (signal.SIGINT, 1.2)])
def test_a_signal_while_control_starts_ends_in_order(tmp_path: Path, number: int, wait_s: float) -> None:
    with sim_process(tmp_path / "rt" / "two-pump-column", pace=PACE) as simulated:
        command = [sys.executable, "-m", "rigd", "run", str(TWO_PUMPS), str(RECIPE), "--pace", f"{PACE:g}"]
        run = subprocess.Popen(
            [*command, "--runs", str(tmp_path / "runs")],
            env={**os.environ, "RIGD_RUNTIME": str(tmp_path / "rt")},
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
        )
        while not list(tmp_path.glob("runs/*/control.log")):  # the guard has started control
            assert run.poll() is None
            time.sleep(0.002)
        time.sleep(wait_s)
        run.send_signal(number)
        said, _ = run.communicate(timeout=60)
        truth = simulated.truth()
    assert run.returncode == 1
    assert "rigd: The run was stopped before its end; every pump is confirmed stopped." in said
    assert "Stopped early" in said
    assert "Traceback" not in said
    assert max(abs(truth["flow:L-A3"]), abs(truth["flow:L-B3"])) < 0.02
    (folder,) = run_folders(tmp_path / "runs")
    assert "Traceback" not in (folder / "control.log").read_text()
    with JournalReader(folder) as journal:
        assert journal.meta["outcome"] == "stopped"
