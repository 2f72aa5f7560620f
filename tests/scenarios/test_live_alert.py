"""A live over-pressure trip, heard outside by a broker subscriber and a web hook, with all processes between."""

from __future__ import annotations

import asyncio
import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import aiomqtt
import pytest
from fakes.broker import running_broker
from fakes.web_hook import web_hook

from rigd.adapters.sim_client import ask

pytestmark = [pytest.mark.slow, pytest.mark.broker, pytest.mark.timeout(180)]

CONFIGS = Path(__file__).parents[2] / "configs"
RECIPE = CONFIGS / "recipes" / "demo-sweep.toml"
PACE = "20"


def rig_with_ears(folder: Path, mqtt_port: int, hook_port: int) -> Path:
    text = (CONFIGS / "rigs" / "two-pump-column.toml").read_text()
    chemistry = CONFIGS / "chemistry" / "esterification.toml"
    text = text.replace('"../chemistry/esterification.toml"', f'"{chemistry}"')
    ears = f"""
[outside.mqtt]
host = "127.0.0.1"
port = {mqtt_port}
prefix = "lab"

[[outside.alerts]]
name = "hook"
url = "json://127.0.0.1:{hook_port}/"
priority_at_least = "high"
"""
    rig = folder / "rig.toml"
    rig.write_text(text + ears)
    return rig


async def first_alert(port: int, wanted: str) -> dict[str, Any]:
    async with aiomqtt.Client("127.0.0.1", port) as client:
        await client.subscribe("lab/two-pump-column/alert", qos=1)
        async for message in client.messages:
            alert = json.loads(message.payload)  # type: ignore[arg-type]
            if wanted in alert["title"]:
                return dict(alert)
    raise AssertionError("the broker went away")


async def until_running(meeting: Path) -> None:
    deadline = time.monotonic() + 90
    while time.monotonic() < deadline:
        await asyncio.sleep(0.3)
        if (meeting / "ports.json").exists():
            truth = (await asyncio.to_thread(ask, meeting, {"do": "truth"}))["truth"]
            if truth["flow:L-A3"] > 0.1 and truth["pressure:TEE"] > 1.5:
                return
    raise AssertionError("the run did not begin to pump")


async def test_trip_is_heard_within_two_seconds_and_says_what_to_do(tmp_path: Path) -> None:
    environment = {**os.environ, "RIGD_RUNTIME": str(tmp_path / "rt")}
    meeting = tmp_path / "rt" / "two-pump-column"
    with running_broker(tmp_path) as broker, web_hook() as hook:
        rig = rig_with_ears(tmp_path, broker.port, hook.port)
        rigd = [sys.executable, "-m", "rigd"]
        sim = subprocess.Popen([*rigd, "sim", str(rig), "--pace", PACE, "--quiet"], env=environment)
        try:
            while not (meeting / "ports.json").exists():
                await asyncio.sleep(0.1)
            command = [*rigd, "run", str(rig), str(RECIPE), "--pace", PACE, "--runs", str(tmp_path / "runs")]
            run = subprocess.Popen(command, env=environment, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
            await until_running(meeting)
            listening = asyncio.create_task(first_alert(broker.port, "TRIP PRESSURE-HIGH"))
            await asyncio.sleep(1.0)
            started = time.monotonic()
            await asyncio.to_thread(ask, meeting, {"do": "fault", "kind": "block", "target": "L-4", "magnitude": 1})
            alert = await asyncio.wait_for(listening, 20)
            heard_s = time.monotonic() - started
            status = await asyncio.to_thread(run.wait, 60)
        finally:
            sim.send_signal(signal.SIGINT)
            await asyncio.to_thread(sim.wait, 20)
        assert heard_s < 2.0, f"heard after {heard_s:.1f} s"
        assert status == 1
        for part in ("SIMULATED", "PRESSURE-HIGH"):
            assert part in alert["title"]
        for part in ("bar", "limit", "stop", "Find the block"):
            assert part in alert["text"]
        assert any("TRIP PRESSURE-HIGH" in post["title"] for post in hook.posts)
