"""Where things meet on this computer: the runtime folder, running daemons, served simulators, run folders.

The runtime folder is ``$RIGD_RUNTIME``, else ``$XDG_RUNTIME_DIR/rigd``, else ``/tmp/rigd-<uid>``; it belongs to the
user alone (mode 0700). In it: ``<rig>/ports.json`` of a simulator, ``<rig>/run-<pid>.json`` and
``<rig>/door-<pid>.sock`` of a daemon, and ``locks/``.
"""

from __future__ import annotations

import contextlib
import json
import os
import stat
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rigd.model.errors import LinkError, RigError

SIMULATED = "simulated"
"""The port word of a rig file that means: whatever ``rigd sim`` serves under this rig's name."""
SOCKET_PATH_MAX = 100
"""Unix socket addresses hold 107 bytes on Linux and 103 elsewhere; a margin for both."""


def runtime_folder() -> Path:
    """The runtime folder, made if missing; ``RigError`` when it cannot be made or belongs to somebody else."""
    if named := os.environ.get("RIGD_RUNTIME"):
        folder = Path(named)
    elif session := os.environ.get("XDG_RUNTIME_DIR"):
        folder = Path(session) / "rigd"
    else:
        folder = Path(f"/tmp/rigd-{os.getuid()}")
    try:
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        owner = folder.stat()
        if owner.st_uid != os.getuid() or not stat.S_ISDIR(owner.st_mode):
            raise RigError(f"{folder} belongs to another user; set RIGD_RUNTIME to a folder of your own")
        if stat.S_IMODE(owner.st_mode) & 0o077:
            folder.chmod(0o700)
    except OSError as error:
        raise RigError(f"cannot use {folder} as runtime folder ({error.strerror}); set RIGD_RUNTIME") from error
    return folder


def rig_folder(rig_name: str) -> Path:
    """The meeting folder of a rig, made if missing."""
    folder = runtime_folder() / rig_name
    folder.mkdir(mode=0o700, exist_ok=True)
    return folder


def door_path(rig_name: str, pid: int) -> Path:
    """Where the daemon with this process id listens; short enough for a socket address, or ``RigError``."""
    path = rig_folder(rig_name) / f"door-{pid}.sock"
    if len(os.fsencode(path)) > SOCKET_PATH_MAX:
        raise RigError(f"{path} is too long for a socket address; set RIGD_RUNTIME to a shorter folder")
    return path


@dataclass(frozen=True, slots=True)
class Daemon:
    """A running daemon as announced in the runtime folder."""

    pid: int
    rig: str
    run: str
    folder: str
    door: str


def announce(daemon: Daemon) -> Path:
    """Make the daemon known to ``rigd watch`` and friends; returns the file that the guard removes at the end."""
    path = rig_folder(daemon.rig) / f"run-{daemon.pid}.json"
    facts = {name: getattr(daemon, name) for name in Daemon.__slots__}
    write_json(path, facts)
    return path


def running_daemons() -> list[Daemon]:
    """All daemons of this user that are alive; what dead ones left behind is removed."""
    found = []
    for path in sorted(runtime_folder().glob("*/run-*.json")):
        facts = read_json(path)
        try:
            daemon = Daemon(**facts)
        except TypeError:
            continue
        if alive(daemon.pid):
            found.append(daemon)
        else:
            path.unlink(missing_ok=True)
            Path(daemon.door).unlink(missing_ok=True)
    return found


def simulated_ports(rig_name: str, rig_path: str, pace: float) -> Mapping[str, str]:
    """Link id -> port as served by ``rigd sim``; ``LinkError`` says how to start it or which pace it has."""
    meeting = runtime_folder() / rig_name / "ports.json"
    facts = read_json(meeting)
    start = f"rigd sim {rig_path}" + (f" --pace {pace:g}" if pace != 1 else "")
    if not facts or not alive(int(facts.get("pid", 0))):
        raise LinkError(f"the simulated rig {rig_name!r} is not being served; start it with: {start}")
    served = float(facts.get("pace", 1.0))
    if served != pace:
        raise LinkError(
            f"the simulated rig {rig_name!r} runs at pace {served:g}, this run at {pace:g}; they must be equal. "
            f"Use --pace {served:g}, or restart the simulator with: {start}"
        )
    return {str(link): str(port) for link, port in facts.get("ports", {}).items()}


def alive(pid: int) -> bool:
    """True when a process with this id exists and is not a zombie."""
    if pid <= 0:
        return False
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    with contextlib.suppress(OSError):
        return "State:\tZ" not in Path(f"/proc/{pid}/status").read_text(encoding="ascii", errors="replace")
    return True


def read_json(path: Path) -> dict[str, Any]:
    """The object in a file, or an empty one when the file is missing or not an object."""
    try:
        facts = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
    return facts if isinstance(facts, dict) else {}


def write_json(path: Path, facts: Mapping[str, Any]) -> None:
    """Write a file whole or not at all; readable by the user only."""
    beside = path.with_name(f".{path.name}.{os.getpid()}")
    beside.write_text(json.dumps(facts, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")
    beside.chmod(0o600)
    beside.replace(path)


def run_folders(runs: Path) -> Iterator[Path]:
    """Run folders under ``runs``, oldest first (their names begin with the UTC stamp)."""
    if runs.is_dir():
        yield from (folder for folder in sorted(runs.iterdir()) if (folder / "run.sqlite").is_file())
