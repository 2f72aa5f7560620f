"""Serial ports of this computer, by names that stay when plugs are changed."""

from __future__ import annotations

from pathlib import Path

from serial.tools.list_ports import comports


def serial_ports() -> list[dict[str, str]]:
    """``port`` (the stable name where the system has one), ``device`` and ``what`` of each."""
    stable = {str(path.resolve()): str(path) for path in sorted(Path("/dev/serial/by-id").glob("*"))}
    return [
        {"port": stable.get(one.device, one.device), "device": one.device, "what": str(one.description)}
        for one in sorted(comports(), key=lambda one: str(one.device))
    ]
