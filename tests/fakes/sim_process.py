"""A served simulator in a process of its own, found by its entry point as the command line does it."""

from __future__ import annotations

import contextlib
import json
import subprocess
import sys
import time
from collections.abc import Iterator, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from rigd.adapters.sim_client import ask
from rigd.ports.plant import FaultSpec, SimulatorOptions

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
TWO_PUMPS = CONFIGS / "rigs" / "two-pump-column.toml"
START_LIMIT_s = 50.0
"""A first start on a new machine compiles the plant's kernels."""
END_LIMIT_s = 10.0

_PROGRAM = """
import json, sys
from importlib.metadata import entry_points
from rigd.config import load_rig
from rigd.ports.plant import FaultSpec, SimulatorOptions
(entry,) = entry_points(group="rigd.simulators", name="simulated")
options = json.loads(sys.argv[2])
options["faults"] = tuple(FaultSpec(**fault) for fault in options["faults"])
sys.exit(entry.load().serve(load_rig(sys.argv[1]), SimulatorOptions(**options)))
"""


@dataclass(frozen=True, slots=True)
class SimProcess:
    """A running simulator: its meeting folder, its ports by link, and the process."""

    folder: Path
    ports: Mapping[str, str]
    process: subprocess.Popen[str]

    def ask(self, do: str, **more: Any) -> dict[str, Any]:
        """One control line; ``DoorError`` when refused."""
        return ask(self.folder, {"do": do, **more})

    def truth(self) -> Mapping[str, float]:
        """True state of the plant."""
        return dict(self.ask("truth")["truth"])


@contextlib.contextmanager
def sim_process(
    folder: Path,
    rig: Path = TWO_PUMPS,
    *,
    pace: float = 1.0,
    transport: str = "pty",
    seed: int = 1,
    faults: tuple[FaultSpec, ...] = (),
) -> Iterator[SimProcess]:
    """Serve ``rig`` with ``folder`` as meeting folder (a short path); ended by SIGTERM, which must end it well."""
    options = asdict(SimulatorOptions(str(folder), pace, transport, seed, faults, quiet=True))
    command = [sys.executable, "-c", _PROGRAM, str(rig), json.dumps(options)]
    with subprocess.Popen(command, stderr=subprocess.PIPE, text=True) as process:
        try:
            yield SimProcess(folder, _ports(folder, process), process)
        finally:
            process.terminate()
            try:
                _, said = process.communicate(timeout=END_LIMIT_s)
            except subprocess.TimeoutExpired:
                process.kill()
                raise
    assert process.returncode == 0, said


def _ports(folder: Path, process: subprocess.Popen[str]) -> Mapping[str, str]:
    meeting = folder / "ports.json"
    end_s = time.monotonic() + START_LIMIT_s
    while True:
        facts = json.loads(meeting.read_text(encoding="utf-8")) if meeting.exists() else {}
        if facts.get("pid") == process.pid:  # not what a killed one left behind
            return dict(facts["ports"])
        assert process.poll() is None, process.stderr.read() if process.stderr else ""
        assert time.monotonic() < end_s, "the simulator did not start in time"
        time.sleep(0.01)
