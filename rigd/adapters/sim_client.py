"""A client of a served simulator's control socket: inject and clear faults, ask for the true state, stop it.

One JSON object per line over ``<folder>/sim.sock``; the folder is where the simulator wrote its ``ports.json``.
Requests: ``{"do": "fault", "kind", "target", "magnitude", "duration_s", "after_s"}`` (the last three may be missing),
``{"do": "clear", "kind", "target"}``, ``{"do": "truth"}``, ``{"do": "faults"}``, ``{"do": "stop"}``. Each is answered
by ``{"ok": true, ...}`` or ``{"ok": false, "why": sentence}``.
"""

from __future__ import annotations

import json
import socket
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rigd.model.errors import DoorError

SOCKET = "sim.sock"
ANSWER_WAIT_s = 5.0
ANSWER_MAX = 1_000_000


def ask(folder: Path, message: Mapping[str, Any]) -> dict[str, Any]:
    """Send one control line and return the answer without its ``ok``.

    Raises ``DoorError`` with a sentence when nobody serves the folder, no answer comes in 5 s, or it is a refusal.
    """
    answer = _exchange(folder, json.dumps(message).encode() + b"\n")
    if answer.pop("ok", False) is not True:
        raise DoorError(str(answer.get("why", "the simulator refused without a reason")))
    return answer


def _exchange(folder: Path, line: bytes) -> dict[str, Any]:
    try:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as door:
            door.settimeout(ANSWER_WAIT_s)
            door.connect(str(folder / SOCKET))
            door.sendall(line)
            with door.makefile("rb") as lines:
                answer = json.loads(lines.readline(ANSWER_MAX))
    except TimeoutError as error:
        raise DoorError(f"the simulator in {folder} did not answer within {ANSWER_WAIT_s:g} s") from error
    except OSError as error:
        reason = error.strerror or str(error)
        raise DoorError(f"no simulated rig is served in {folder} ({reason}); start it with: rigd sim RIG") from error
    except ValueError as error:
        raise DoorError(f"the simulator in {folder} gave an answer that cannot be read") from error
    if not isinstance(answer, dict):
        raise DoorError(f"the simulator in {folder} gave an answer that cannot be read")
    return answer
