"""One daemon per port: locks in the runtime folder, keyed by the resolved port.

A lock is an advisory file lock (flock) that the kernel drops with the last process that holds the descriptor, so
nothing stale ever blocks a port. The file's text names the holder. The descriptors are handed on to the guard and to
control: the port stays locked until both are gone.
"""

from __future__ import annotations

import contextlib
import fcntl
import hashlib
import json
import os
from collections.abc import Iterable
from pathlib import Path

from rigd.adapters.places import read_json, runtime_folder
from rigd.model.errors import LinkBusy


def resolved(port: str) -> str:
    """The same text for all names of one port: links in the file system are followed, URLs stay as they are."""
    return port if "://" in port else os.path.realpath(port)


def lock_ports(ports: Iterable[str], *, rig: str, folder: str, pid: int) -> list[int]:
    """Lock all ports, or none and raise ``LinkBusy`` naming the daemon that has one. Returns the descriptors."""
    held: list[int] = []
    try:
        for port in sorted({resolved(port) for port in ports}):
            held.append(_lock(port, {"port": port, "pid": pid, "rig": rig, "folder": folder}))
    except BaseException:
        unlock(held)
        raise
    return held


def unlock(descriptors: Iterable[int]) -> None:
    """Give the ports back."""
    for descriptor in descriptors:
        with contextlib.suppress(OSError):
            os.close(descriptor)


def _lock(port: str, holder: dict[str, object]) -> int:
    path = _path(port)
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        os.close(descriptor)
        other = read_json(path)
        raise LinkBusy(
            f"port {port} is in use by process {other.get('pid', '?')} running rig {other.get('rig', '?')!r} "
            f"({other.get('folder', 'unknown folder')}); stop that run first, or name another port in the rig file"
        ) from error
    os.truncate(descriptor, 0)
    os.pwrite(descriptor, json.dumps(holder).encode(), 0)
    return descriptor


def _path(port: str) -> Path:
    folder = runtime_folder() / "locks"
    folder.mkdir(mode=0o700, exist_ok=True)
    return folder / f"{hashlib.sha256(port.encode()).hexdigest()[:24]}.lock"
