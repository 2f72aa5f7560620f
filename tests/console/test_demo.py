"""The demonstration, whole: simulator in its own process, real serial bytes, live control, report."""

from __future__ import annotations

import contextlib
import json
import os
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import pytest

from rigd.runtime.replay import replay

ROOT = Path(__file__).resolve().parents[2]


@pytest.mark.slow
@pytest.mark.timeout(400)
def test_demo_is_done_and_conversion_falls_as_flow_rises(tmp_path):
    command = [sys.executable, "-m", "rigd", "demo", "--runs", str(tmp_path / "runs"), "--json"]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, timeout=390, check=False)
    assert done.returncode == 0, done.stderr[-2000:]
    facts = json.loads(done.stdout)
    assert facts["outcome"] == "done"
    assert facts["simulated"] is True
    points = sorted(facts["points"], key=lambda point: sum(point["flow_mL_min"].values()))
    assert len(points) >= 5
    conversions = [point["conversion"] for point in points]
    assert conversions == sorted(conversions, reverse=True)
    assert all(point["status"] == "collected" for point in points)
    page = Path(facts["report"]).read_text()
    assert "SIMULATED" in page
    assert f"{100 * conversions[0]:.1f}" in page
    assert "report: " in done.stderr
    assert "Traceback" not in done.stderr
    found = replay(Path(facts["folder"]))
    assert found.same
    assert found.scans > 1000
    assert found.recorded.meta["end"].startswith("The recipe was carried out to its end")


def living_with(word: str) -> list[str]:
    """Command lines of processes whose environment holds ``word``."""
    found = []
    for process in Path("/proc").glob("[0-9]*"):
        with contextlib.suppress(OSError):
            if word.encode() in (process / "environ").read_bytes():
                found.append((process / "cmdline").read_bytes().replace(b"\0", b" ").decode())
    return found


@pytest.mark.slow
@pytest.mark.skipif(not Path("/proc/self/environ").exists(), reason="looks at processes through /proc")
def test_ctrl_c_twice_cuts_and_leaves_no_process_behind(tmp_path):
    """The first Ctrl-C asks the run for an orderly stop, the second for a cut; exit 1, and nothing of it lives on."""
    command = [sys.executable, "-m", "rigd", "demo", "--runs", str(tmp_path / "runs")]
    with tempfile.TemporaryDirectory(prefix="rigd-t-") as short:
        surroundings = {**os.environ, "TMPDIR": short}
        with subprocess.Popen(
            command, cwd=ROOT, stderr=subprocess.PIPE, text=True, start_new_session=True, env=surroundings
        ) as demo:
            assert demo.stderr is not None
            assert any("Prime" in line for line in demo.stderr)
            assert any(" sim " in line for line in living_with(short))
            os.killpg(demo.pid, signal.SIGINT)
            time.sleep(1.0)
            os.killpg(demo.pid, signal.SIGINT)
            rest = demo.stderr.read()
            assert demo.wait(60) == 1, rest
        assert "Traceback" not in rest
        assert living_with(short) == []


@pytest.mark.slow
@pytest.mark.skipif(not Path("/proc/self/environ").exists(), reason="looks at processes through /proc")
@pytest.mark.parametrize(("number", "seconds"), [(signal.SIGTERM, 15), (signal.SIGKILL, 15)])
def test_a_demo_that_is_ended_before_its_run_leaves_no_simulator(number, seconds):
    """Its pipe ends with it, however it ends."""
    command = [sys.executable, "-m", "rigd", "demo"]
    with tempfile.TemporaryDirectory(prefix="rigd-t-") as short:
        surroundings = {**os.environ, "TMPDIR": short}
        with subprocess.Popen(command, cwd=short, stderr=subprocess.DEVNULL, env=surroundings) as demo:
            end_s = time.monotonic() + seconds
            while not any(" sim " in line for line in living_with(short)):
                assert time.monotonic() < end_s
                time.sleep(0.002)
            demo.send_signal(number)
        while living_with(short):
            assert time.monotonic() < end_s, living_with(short)
            time.sleep(0.1)
