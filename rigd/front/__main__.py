"""``python -m rigd.front plan.json``: the front process of one run, started by the guard."""

from __future__ import annotations

import asyncio
import contextlib
import json
import logging
import signal
import sys
import time
from pathlib import Path

from rigd.adapters import run_folder
from rigd.adapters.alert_channels import AppriseSender
from rigd.adapters.alert_log import AlertLog
from rigd.adapters.door_client import SocketDoor
from rigd.config import load_rig
from rigd.front.service import Front
from rigd.model.errors import DoorError

DOOR_WAIT_S = 30.0
REPORT_S = 2.0


def door_opens(path: Path) -> bool:
    """Wait until the daemon's door is there; False when it is not in ``DOOR_WAIT_S``."""
    deadline_s = time.monotonic() + DOOR_WAIT_S
    while not path.exists():
        if time.monotonic() > deadline_s:
            return False
        time.sleep(0.05)
    return True


async def serve(front: Front, door: SocketDoor) -> None:
    """Run, and tell the daemon all the while whether people can be alerted."""

    async def report() -> None:
        while True:
            with contextlib.suppress(DoorError):
                await door.tell_alerts(front.down())
            await asyncio.sleep(REPORT_S)

    reporter = asyncio.create_task(report(), name="report")
    await front.run(door.messages())
    reporter.cancel()


def main(plan_path: str) -> int:
    """Tell the world about the run that the plan describes; returns when its door has closed."""
    logging.basicConfig(level=logging.WARNING, format="%(asctime)s %(name)s %(message)s", stream=sys.stderr)
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the guard tells when it is over: the door closes
    signal.signal(signal.SIGTERM, signal.SIG_IGN)
    plan = json.loads(Path(plan_path).read_text(encoding="utf-8"))
    rig = load_rig(Path(plan["folder"]) / run_folder.RIG)
    senders = [AppriseSender(channel) for channel in rig.outside.channels]
    door = Path(plan["door"])
    if not door_opens(door):
        return 1
    attempted = AlertLog(Path(plan["folder"])).attempt
    asyncio.run(serve(Front(rig.name, rig.outside, senders, attempted), SocketDoor(door)))
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1]))
