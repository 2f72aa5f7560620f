"""The guard's plan as JSON: what it starts, and the last wills as hexadecimal bytes, so that it needs nothing else."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from rigd.adapters.serial_link import as_the_port_can
from rigd.model.devices import LastWill, WillFrame


def helper(name: str, argv: Sequence[str], shown: bool) -> dict[str, Any]:
    """A process beside control whose life or death changes nothing; ``shown``: its stderr is the terminal."""
    return {"name": name, "argv": list(argv), "shown": shown}


def with_folder(command: Sequence[str], folder: Path) -> list[str]:
    """A command with the run folder in place of ``{folder}``."""
    return [word.replace("{folder}", str(folder)) for word in command]


def will_facts(will: LastWill, last_resort: bool) -> dict[str, Any]:
    """One last will: port settings, frames, and the frames that check it; whether others are tried first."""
    link = as_the_port_can(will.link)
    return {
        "device": will.device,
        "port": link.port,
        "baud": link.baud,
        "data_bits": link.data_bits,
        "parity": link.parity,
        "stop_bits": link.stop_bits,
        "frames": _frames(will.frames),
        "check": _frames(will.check),
        "last_resort": last_resort,
    }


def _frames(frames: Sequence[WillFrame]) -> list[dict[str, Any]]:
    return [
        {"request": frame.request.hex(), "good_reply": frame.good_reply.hex(), "timeout_s": frame.reply_timeout_s}
        for frame in frames
    ]
