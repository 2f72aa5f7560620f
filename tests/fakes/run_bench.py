"""The whole daemon as processes against one ``rigd sim`` on pseudo-terminals; the simulator tells the truth."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

from rigd.adapters.sim_client import ask

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
NAME = "two-pump-column"
PACE = 20.0
START = """
import sys
from pathlib import Path
from rigd.app import RunSettings, start_run
from rigd.model.errors import RigError
try:
    start_run(Path(sys.argv[1]), Path(sys.argv[2]), RunSettings(pace=float(sys.argv[3]), runs=Path(sys.argv[4])))
except RigError as error:
    sys.exit(f"refused: {error}")
"""


class Bench:
    """One simulator and the runs against it."""

    def __init__(self, folder: Path, rig: Path = RIG, recipe: Path = RECIPE) -> None:
        self.rig, self.recipe = rig, recipe
        self.runs = folder / "runs"
        self.meeting = folder / "rt" / NAME
        self.env = {**os.environ, "RIGD_RUNTIME": str(folder / "rt")}
        command = [sys.executable, "-m", "rigd", "sim", str(rig), "--pace", f"{PACE:g}", "--quiet"]
        self.sim = subprocess.Popen(command, env=self.env)
        self._started: list[subprocess.Popen[str]] = []

    def start(self) -> subprocess.Popen[str]:
        command = [sys.executable, "-c", START, str(self.rig), str(self.recipe), f"{PACE:g}", str(self.runs)]
        run = subprocess.Popen(command, env=self.env, stderr=subprocess.PIPE, text=True)
        self._started.append(run)
        return run

    def running(self) -> tuple[subprocess.Popen[str], int]:
        """A run whose pumps deliver; (guard, process id of control)."""
        run = self.start()
        wait(lambda: self.flow() > 0.1, 60)
        return run, child_of(run.pid)

    def truth(self) -> dict[str, float]:
        """The true state of the plant, by name."""
        truth = ask(self.meeting, {"do": "truth"})
        return dict(truth.get("truth", truth))

    def flow(self) -> float:
        """What really leaves the pumps [mL/min]."""
        truth = self.truth()
        return max(abs(float(truth["flow:L-A3"])), abs(float(truth["flow:L-B3"])))

    def folder(self) -> Path:
        return sorted(self.runs.iterdir())[-1]

    def close(self) -> None:
        for run in self._started:
            for process in (child_of(run.pid), run.pid):
                if process and run.poll() is None:
                    os.kill(process, signal.SIGKILL)
            run.wait()
            if run.stderr is not None:
                run.stderr.close()
        self.sim.send_signal(signal.SIGINT)
        self.sim.wait(10)


def wait(condition: object, seconds: float) -> float:
    """Wait until the condition holds; the seconds that it took."""
    began = time.monotonic()
    while not condition():  # type: ignore[operator]
        assert time.monotonic() - began < seconds, "waited in vain"
        time.sleep(0.02)
    return time.monotonic() - began


def child_of(pid: int, module: bytes = b"rigd.app") -> int:
    """The control process (or that of another ``module``) among the children of a guard; 0 when there is none."""
    try:
        children = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
        for child in children:
            if module in Path(f"/proc/{child}/cmdline").read_bytes():
                return int(child)
    except OSError:
        pass
    return 0
