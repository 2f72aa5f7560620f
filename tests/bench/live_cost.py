"""What the daemon costs while it runs: processor and memory of control, as the system counts them.

``rigd sim`` and ``rigd run`` as a person starts them, at the pace of the wall, the sensor module read ten times a
second.
"""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from bench.figures import Figure, Scale, Target
from bench.start_time import CONFIGS, RIG

from rigd.adapters import run_folder
from rigd.adapters.journal_reader import JournalReader
from rigd.config import load_rig

START_s = 90.0
SETTLE_s = 8.0
TICK_s = 1 / os.sysconf("SC_CLK_TCK")


@dataclass
class LiveCost:
    """Control, over ``seconds``: processor [% of one core], memory [MB], scans a second."""

    processor_percent: float
    memory_MB: float
    scans_per_s: float
    tags: int


def live_figures(scale: Scale) -> Iterator[Figure]:
    """Control at 10 Hz."""
    seconds = scale.pick(1, 20, 120)
    cost = measure_live(seconds)
    about = f"{cost.tags} tags: 4 sensors at 10 Hz, the rest as in the rig file; {cost.scans_per_s:.0f} scans/s"
    yield Figure(
        "live.processor", "control at 10 Hz, processor", "% of a core", cost.processor_percent,
        target=Target(value_max=4), note=f"{about}; over {seconds} s, no page yet: `rigd run` shows its progress",
    )  # fmt: skip
    yield Figure("live.memory", "control at 10 Hz, resident memory", "MB", cost.memory_MB, target=Target(value_max=90))


def measure_live(seconds: float) -> LiveCost:
    """Serve, run, wait until it runs smoothly, look, stop."""
    with tempfile.TemporaryDirectory(prefix="rigd-") as name:
        folder = Path(name)
        run_folder.freeze_files(folder, RIG, CONFIGS / "recipes" / "demo-sweep.toml")
        rig = folder / run_folder.RIG
        rig.write_text(_quick(rig.read_text(encoding="utf-8")), encoding="utf-8")
        definition = load_rig(rig)
        environment = {**os.environ, "RIGD_RUNTIME": str(folder / "rt")}
        with _started(["sim", str(rig), "--quiet"], environment):
            _wait(lambda: (folder / "rt" / definition.name / "ports.json").exists())
            command = ["run", str(rig), str(folder / run_folder.RECIPE), "--runs", str(folder / "runs")]
            with _started(command, environment) as guard:
                control = _wait(lambda: _control_of(guard.pid))
                time.sleep(SETTLE_s)
                before_s, began_s = _cpu_s(control), time.monotonic()
                time.sleep(seconds)
                used_s, took_s = _cpu_s(control) - before_s, time.monotonic() - began_s
                memory_MB = _resident_MB(control)
                assert guard.poll() is None, "the run ended too soon"
        scans_per_s = _scan_rate(next((folder / "runs").iterdir()))
    return LiveCost(100 * used_s / took_s, memory_MB, scans_per_s, len(definition.tags))


def _quick(text: str) -> str:
    """The sensors' periods made 100 ms; nothing else has one before its ``stale_after``."""
    lines = text.split("\n")
    for number, line in enumerate(lines):
        if line.startswith("period = ") and lines[number + 1].startswith("stale_after"):
            lines[number] = 'period = "100 ms"'
    return "\n".join(lines)


@contextlib.contextmanager
def _started(arguments: list[str], environment: dict[str, str]) -> Iterator[subprocess.Popen[bytes]]:
    command = [sys.executable, "-m", "rigd", *arguments]
    with subprocess.Popen(command, env=environment, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE) as process:
        try:
            yield process
        finally:
            for number in (signal.SIGINT, signal.SIGINT, signal.SIGKILL):
                if process.poll() is None:
                    process.send_signal(number)
                    with contextlib.suppress(subprocess.TimeoutExpired):
                        process.wait(5)


def _wait(found: Callable[[], int]) -> int:
    deadline_s = time.monotonic() + START_s
    while not (value := found()):
        if time.monotonic() > deadline_s:
            raise RuntimeError("the run did not start")
        time.sleep(0.05)
    return value


def _control_of(guard: int) -> int:
    """The control process among the guard's children, 0 before it is there."""
    with contextlib.suppress(OSError):
        for child in Path(f"/proc/{guard}/task/{guard}/children").read_text().split():
            if b"rigd.app" in Path(f"/proc/{child}/cmdline").read_bytes():
                return int(child)
    return 0


def _cpu_s(pid: int) -> float:
    """User and system time of all threads."""
    fields = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) * TICK_s


def _resident_MB(pid: int) -> float:
    for line in Path(f"/proc/{pid}/status").read_text().splitlines():
        if line.startswith("VmRSS"):
            return int(line.split()[1]) / 1024
    raise RuntimeError(f"no resident memory is told of process {pid}")


def _scan_rate(folder: Path) -> float:
    with JournalReader(folder) as journal:
        clock = journal.clock()
    return (len(clock) - 1) / ((clock[-1][0] - clock[0][0]) / 1e9)
