"""The folder where a server and its clients meet: one server at a time, and the list of its ports."""

from __future__ import annotations

import contextlib
import fcntl
import json
import os
from collections.abc import Mapping
from pathlib import Path

from rigd.model.errors import LinkBusy, RigError

PORTS, LOCK, SOCKET = "ports.json", "sim.lock", "sim.sock"


class Meeting:
    """Holds the folder for this process until ``close``.

    The lock is the operating system's, so it ends with the process, however that ends. Raises ``LinkBusy`` naming the
    process that holds it, ``RigError`` when the folder cannot be used.
    """

    def __init__(self, folder: str) -> None:
        self._folder = Path(folder)
        try:
            self._folder.mkdir(parents=True, exist_ok=True)
            self._lock = os.open(self._folder / LOCK, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
        except OSError as error:
            raise RigError(f"cannot use the folder {folder}: {error.strerror}") from error
        try:
            fcntl.flock(self._lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.read(self._lock, 20).decode("ascii", "replace").strip() or "unknown"
            os.close(self._lock)
            raise LinkBusy(f"process {holder} already serves a simulated rig in {folder}; end it first") from None
        os.ftruncate(self._lock, 0)
        os.write(self._lock, f"{os.getpid()}\n".encode())
        self._forget()

    @property
    def socket_path(self) -> Path:
        """Where control lines are taken."""
        return self._folder / SOCKET

    def announce(self, rig: str, pace: float, ports: Mapping[str, str]) -> None:
        """Write the list of ports, whole or not at all."""
        facts = {"rig": rig, "pid": os.getpid(), "pace": pace, "ports": dict(ports)}
        beside = self._folder / f".{PORTS}.{os.getpid()}"
        beside.write_text(json.dumps(facts, indent=1) + "\n", encoding="utf-8")
        beside.chmod(0o600)
        beside.replace(self._folder / PORTS)

    def close(self) -> None:
        """Take back what was announced and let the next server in."""
        self._forget()
        with contextlib.suppress(OSError):
            os.close(self._lock)

    def _forget(self) -> None:
        """Remove what is announced here, by this server or by one that was killed."""
        for name in (PORTS, SOCKET):
            (self._folder / name).unlink(missing_ok=True)
