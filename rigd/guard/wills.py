"""Send last wills: take the ports, send the exact bytes, demand the right answers, repeat until all are there."""

from __future__ import annotations

import contextlib
import re
import time
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import serial

TRIES = 3
"""After so many rounds without every answer, the devices of the last resort are told as well."""
PAUSE_S = (0.1, 0.2, 0.5, 1.0, 2.0)
LOG_LINES = 400  # in full; from then on only every hundredth, so that a night of trying fills no disk
PARITY = {"none": serial.PARITY_NONE, "even": serial.PARITY_EVEN, "odd": serial.PARITY_ODD}


class Log:
    """A bounded text log with UTC stamps; a full disk never stops the guard."""

    def __init__(self, path: Path) -> None:
        self._path = path
        self._lines = 0

    def write(self, text: str) -> None:
        """Append one line."""
        self._lines += 1
        if self._lines > LOG_LINES and self._lines % 100:
            return
        with contextlib.suppress(OSError), self._path.open("a", encoding="utf-8") as file:
            file.write(f"{datetime.now(UTC).isoformat(timespec='milliseconds')} {text}\n")


def send_wills(wills: list[dict[str, Any]], log: Log, give_up: Callable[[], bool]) -> dict[str, dict[str, Any]]:
    """Stop every device, in the order of ``wills``, again and again until each has confirmed or ``give_up`` says so.

    Those of the last resort take the drive power away. They are told only when others have not confirmed in ``TRIES``
    rounds, and are left out of the answer when that was not needed.
    """
    states: dict[str, dict[str, Any]] = {}
    ports: dict[str, serial.Serial] = {}
    turn = -1
    while True:
        turn += 1
        for will in wills:
            if turn < TRIES and will.get("last_resort"):
                continue
            state = states.setdefault(will["device"], {"confirmed": False, "attempts": 0, "detail": ""})
            if not state["confirmed"]:
                state["attempts"] += 1
                state["detail"] = _attempt(will, ports)
                state["confirmed"] = not state["detail"]
                log.write(f"{will['device']}: {state['detail'] or _done(will)}")
        if give_up() or all(state["confirmed"] for state in states.values()):
            break
        time.sleep(PAUSE_S[min(turn, len(PAUSE_S) - 1)])
    for port in ports.values():
        with contextlib.suppress(OSError):
            port.close()
    return states


def _done(will: dict[str, Any]) -> str:
    return "drive power taken away, confirmed" if will.get("last_resort") else "stopped, confirmed"


def _attempt(will: dict[str, Any], ports: dict[str, serial.Serial]) -> str:
    """One try at one device; "" when every answer was good, else what was wrong."""
    name = will["port"]
    try:
        if name not in ports:
            ports[name] = _open(will)
        answers = [_exchange(ports[name], frame) for frame in (*will["frames"], *will["check"])]
    except Exception as error:  # noqa: BLE001 - whatever a port does, the next try and the next device must come
        with contextlib.suppress(OSError, KeyError):
            ports.pop(name).close()
        return f"{name}: {error}"
    return next((answer for answer in answers if answer), "")


def _open(will: dict[str, Any]) -> serial.Serial:
    """Alone on the port if possible; but a program that took its lock meanwhile must not keep a stop from the wire."""
    try:
        return _opened(will, exclusive=True)
    except serial.SerialException:
        return _opened(will, exclusive=None)


def _opened(will: dict[str, Any], exclusive: bool | None) -> serial.Serial:
    return serial.serial_for_url(
        will["port"],
        baudrate=will["baud"],
        bytesize=will["data_bits"],
        parity=PARITY[will["parity"]],
        stopbits=will["stop_bits"],
        timeout=0.02,
        write_timeout=0.5,
        exclusive=exclusive,
    )


def _exchange(port: serial.Serial, frame: dict[str, Any]) -> str:
    """Send one frame and wait for the answer that its pattern describes; "" when it came."""
    port.reset_input_buffer()
    port.write(bytes.fromhex(frame["request"]))
    if not frame["good_reply"]:
        time.sleep(frame["timeout_s"])
        return ""
    pattern = re.compile(bytes.fromhex(frame["good_reply"]), re.DOTALL)
    heard, deadline_s = b"", time.monotonic() + frame["timeout_s"]
    while time.monotonic() < deadline_s:
        heard += port.read(max(1, port.in_waiting))
        if pattern.search(heard):
            return ""
    return f"no good answer, heard {heard[-80:]!r}"
