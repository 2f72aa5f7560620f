"""What listens at the door while trips are timed: a subscriber in the place of a page, and the front with its broker.

Both are processes of their own, as in a run.
"""

from __future__ import annotations

import contextlib
import json
import shutil
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

from bench.start_time import CONFIGS, RIG
from fakes.broker import running_broker

from rigd.adapters import run_folder

PAGE = """
import asyncio, json, sys
from rigd.adapters.door_client import SocketDoor
async def read():
    async for message in SocketDoor(sys.argv[1]).messages():
        json.dumps(message)
asyncio.run(read())
"""


@contextlib.contextmanager
def listeners(folder: Path, door: Path) -> Iterator[str]:
    """Listen at ``door`` from now on; says in words who does."""
    with contextlib.ExitStack() as stack:
        words = ["a subscriber in the place of the page"]
        stack.enter_context(_process([sys.executable, "-c", PAGE, str(door)]))
        if shutil.which("mosquitto"):
            broker = stack.enter_context(running_broker(folder))
            plan = _front_plan(folder, door, broker.port)
            stack.enter_context(_process([sys.executable, "-m", "rigd.front", str(plan)]))
            words.append("front and broker")
        time.sleep(1.0)
        yield ", ".join(words)


def _front_plan(folder: Path, door: Path, port: int) -> Path:
    """A run folder for the front with a rig file that names the broker."""
    run_folder.freeze_files(folder, RIG, CONFIGS / "recipes" / "demo-sweep.toml")
    rig = folder / run_folder.RIG
    rig.write_text(rig.read_text() + f'\n[outside.mqtt]\nhost = "127.0.0.1"\nport = {port}\n', encoding="utf-8")
    plan = folder / "plan.json"
    plan.write_text(json.dumps({"folder": str(folder), "door": str(door)}), encoding="utf-8")
    return plan


@contextlib.contextmanager
def _process(command: list[str]) -> Iterator[None]:
    with subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL) as process:
        try:
            yield
            assert process.poll() is None, f"{command[1:3]} ended early"
        finally:
            process.kill()
