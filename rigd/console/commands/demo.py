"""``rigd demo``: a short sweep, live, against the simulated rig in another process, then its report."""

from __future__ import annotations

import contextlib
import os
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import RUNS

DEMO_PACE = 25.0
"""Process seconds per second: the sweep ends within about two minutes."""
SERVED_S, PATIENT_S = 240.0, 5.0
"""Longest wait for the simulator to open its ports (its first start on a computer compiles it), and when to say so."""
ENDED_S = 10.0
CONFIGS = Path(__file__).resolve().parents[3] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"


@click.command()
@click.option("--pace", type=click.FloatRange(min=0, min_open=True), default=DEMO_PACE, show_default=True,
              help="Process seconds per second.")  # fmt: skip
@click.option(
    "--runs", type=click.Path(path_type=Path), default=RUNS, show_default=True, help="Where the run folder goes."
)
@json_option
@click.pass_obj
def demo(output: Output, pace: float, runs: Path) -> int:
    """A sweep of six flow rates on the simulated rig: live control over real serial bytes, then the report.

    Exit 0 only when the sweep was done.
    """
    from rigd.model.errors import RigError

    if not RIG.is_file():
        raise RigError(f"the example files are not at {CONFIGS}; run the demonstration from a checkout")
    output.errors.print(
        "[bold]rigd demo[/]  [bold white on red] SIMULATED [/]  no liquid flows; the chemistry is invented"
    )
    folder = Path(tempfile.mkdtemp(prefix="rigd-demo-"))
    surroundings = {**os.environ, "RIGD_RUNTIME": str(folder)}
    try:
        with _served(output, folder, pace, surroundings) as life:
            run = [
                sys.executable,
                "-m",
                "rigd",
                "run",
                str(RIG),
                str(RECIPE),
                "--pace",
                f"{pace:g}",
                "--runs",
                str(runs),
            ]
            run += ["--json"] if output.json else []
            return _wait(subprocess.Popen(run, env=surroundings, pass_fds=(life,)))
    finally:
        shutil.rmtree(folder, ignore_errors=True)


@contextlib.contextmanager
def _served(output: Output, folder: Path, pace: float, surroundings: dict[str, str]) -> Iterator[int]:
    """The simulated rig in a process of its own, in a session of its own so that Ctrl-C reaches the run first.

    It ends with the last process that holds the descriptor given: this one, and the run, which must not lose its rig.
    """
    command = [sys.executable, "-m", "rigd", "sim", str(RIG), "--pace", f"{pace:g}", "--quiet", "--with-stdin"]
    its_end, life = os.pipe()
    simulator = subprocess.Popen(
        command, env=surroundings, start_new_session=True, stdin=its_end, stdout=subprocess.DEVNULL
    )
    os.close(its_end)
    try:
        _until_served(output, folder, simulator)
        yield life
    finally:
        os.close(life)
        simulator.terminate()
        with contextlib.suppress(subprocess.TimeoutExpired):
            simulator.wait(ENDED_S)
        simulator.kill()
        simulator.wait()


def _until_served(output: Output, folder: Path, simulator: subprocess.Popen[bytes]) -> None:
    from rigd.model.errors import RigError

    began_s, told = time.monotonic(), False
    while not list(folder.glob("*/ports.json")):
        if simulator.poll() is not None:
            raise RigError(f"the simulator ended at once with exit code {simulator.returncode}; try: rigd sim {RIG}")
        waited_s = time.monotonic() - began_s
        if waited_s > PATIENT_S and not told:
            told = True
            output.errors.print(
                "preparing the simulated rig: its first start on a computer compiles it, up to a minute or two"
            )
        if waited_s > SERVED_S:
            raise RigError(f"the simulator did not open its ports within {SERVED_S:g} s; try: rigd sim {RIG}")
        time.sleep(0.05)


def _wait(run: subprocess.Popen[bytes]) -> int:
    """The run's exit code. Ctrl-C goes to the run, which stops in order; here it is only waited for."""
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    hand_on = signal.signal(signal.SIGTERM, lambda number, _: run.send_signal(number))
    try:
        return run.wait()
    finally:
        signal.signal(signal.SIGINT, before)
        signal.signal(signal.SIGTERM, hand_on)
