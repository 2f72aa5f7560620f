"""The whole daemon as processes: ``rigd sim`` on pseudo-terminals, guard and control; killed, hung, signalled."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from fakes.run_bench import NAME, RECIPE, RIG, START, Bench, wait

from rigd.adapters.door_client import SocketDoor
from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.places import read_json
from rigd.adapters.sim_client import ask
from rigd.model.events import EventKind
from rigd.report.collect import read_run
from rigd.report.ending import GUARDED
from rigd.runtime.replay import replay

pytestmark = [pytest.mark.slow, pytest.mark.timeout(180)]


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    bench = Bench(tmp_path)
    try:
        wait((bench.meeting / "ports.json").exists, 90)  # a first start compiles the physics
        yield bench
    finally:
        bench.close()


@pytest.mark.parametrize(("number", "seconds"), [(signal.SIGKILL, 1.0), (signal.SIGSTOP, 2.0)])
def test_pumps_stop_within_2_s_when_control_is_killed_or_hangs(bench: Bench, number: int, seconds: float) -> None:
    run, control = bench.running()
    os.kill(control, number)
    assert wait(lambda: bench.flow() < 0.02, seconds) < seconds
    assert run.wait(20) == 1
    assert run.stderr is not None
    said = run.stderr.read()
    assert "the guard stopped the rig and every device confirmed it" in said
    assert "Traceback" not in said
    with JournalReader(bench.folder()) as journal:
        assert sum(1 for _ in journal.scans()) > 100
        assert "outcome" not in journal.meta
    assert read_json(bench.folder() / "guard.json")["devices"]["pump-a"]["confirmed"]
    told = read_run(bench.folder())
    assert told.outcome == GUARDED
    assert "The guard took over at 20" in told.outcome_text
    assert "pump-a" in told.outcome_text
    found = replay(bench.folder())
    assert found.same
    assert found.scans > 100
    assert any("never closed" in note for note in found.notes)


def test_a_live_run_that_trips_is_decided_again_exactly(bench: Bench) -> None:
    run, _ = bench.running()
    ask(bench.meeting, {"do": "fault", "kind": "block", "target": "L-4", "magnitude": 1.0, "after_s": 0.0})
    assert run.wait(60) == 1
    found = replay(bench.folder())
    assert found.same
    assert found.recorded.meta["outcome"] == "tripped"
    assert found.recorded.meta["end"].startswith("Tripped by PRESSURE-HIGH")
    with JournalReader(bench.folder()) as journal:
        assert journal.events(EventKind.TRIP)[0].subject == "PRESSURE-HIGH"


def test_pumps_stop_when_the_guard_is_killed(bench: Bench) -> None:
    run, control = bench.running()
    run.kill()
    assert wait(lambda: bench.flow() < 0.02, 2) < 2
    wait(lambda: not Path(f"/proc/{control}").exists(), 40)
    with JournalReader(bench.folder()) as journal:
        assert journal.meta["outcome"] in ("stopped", "tripped")
        trips = list(journal.events(EventKind.TRIP))
        assert trips[0].subject == "FAULT-GUARD"
        assert "guard" in trips[0].text


def test_ctrl_c_is_an_orderly_stop_and_a_second_one_a_cut(bench: Bench) -> None:
    run, _ = bench.running()
    run.send_signal(signal.SIGINT)
    time.sleep(0.3)
    run.send_signal(signal.SIGTERM)
    assert run.wait(30) == 1
    assert bench.flow() < 0.02
    with JournalReader(bench.folder()) as journal:
        stops = [event.subject for event in journal.events(EventKind.STOP)]
    assert "quench" in stops
    assert "cut" in stops
    assert not list(bench.meeting.glob("run-*.json"))
    assert not list(bench.meeting.glob("door-*.sock"))


async def test_a_second_daemon_is_refused_and_the_door_of_the_first_answers(bench: Bench) -> None:
    run, _ = bench.running()
    second = bench.start()
    assert second.wait(20) == 1
    assert second.stderr is not None
    assert f"is in use by process {run.pid} running rig '{NAME}'" in second.stderr.read()
    door = SocketDoor(json.loads((bench.folder() / "plan.json").read_text())["door"])
    snapshot = await door.snapshot()
    assert snapshot["run"]["simulated"] is True  # type: ignore[index]
    await door.request("cut", "a test")
    assert run.wait(30) == 1
    assert bench.flow() < 0.02


def test_without_a_simulator_the_command_to_start_it_is_said(tmp_path: Path) -> None:
    env = {**os.environ, "RIGD_RUNTIME": str(tmp_path / "rt")}
    command = [sys.executable, "-c", START, str(RIG), str(RECIPE), "20", str(tmp_path / "runs")]
    done = subprocess.run(command, env=env, capture_output=True, text=True, timeout=30, check=False)
    assert "start it with: rigd sim" in done.stderr
    assert not (tmp_path / "runs").exists()
