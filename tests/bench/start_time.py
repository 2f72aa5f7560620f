"""Time to start: ``rigd --help`` and ``rigd check`` beside an interpreter that does nothing, in turn."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from bench.figures import Figure, Scale, Target, median

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
RIG = CONFIGS / "rigs" / "two-pump-column.toml"
RECIPE = CONFIGS / "recipes" / "overnight-sweep.toml"
COMMANDS: dict[str, list[str]] = {
    "floor": ["-c", "pass"],
    "help": ["-m", "rigd", "--help"],
    "check": ["-m", "rigd", "check", str(RIG), str(RECIPE)],
}


@dataclass(frozen=True, slots=True)
class Took:
    """Wall and processor time of one process [ms]."""

    wall_ms: float
    cpu_ms: float


def start_figures(scale: Scale) -> Iterator[Figure]:
    """Wall time from starting the process to its end."""
    times = start_times(scale.pick(1, 15, 40))
    floor_ms = median([took.wall_ms for took in times["floor"]])
    for name, what, most_ms in (("help", "rigd --help", 150), ("check", "rigd check, 8 h sweep", 400)):
        wall_ms = [took.wall_ms for took in times[name]]
        yield Figure(
            f"start.{name}",
            what,
            "ms",
            median(wall_ms),
            floor_ms,
            "python -c pass",
            Target(value_max=most_ms),
            f"median of {len(wall_ms)}, quickest {min(wall_ms):.0f} ms; processor "
            f"{median([took.cpu_ms for took in times[name]]):.0f} ms",
        )


def start_times(rounds: int) -> dict[str, list[Took]]:
    """Times of all commands, in turn, after one unmeasured round that fills the caches."""
    times: dict[str, list[Took]] = {name: [] for name in COMMANDS}
    for number in range(rounds + 1):
        for name, arguments in COMMANDS.items():
            took = _run(arguments)
            if number:
                times[name].append(took)
    return times


def _run(arguments: Sequence[str]) -> Took:
    environment = {**os.environ}
    environment.pop("PYTHONDONTWRITEBYTECODE", None)  # an installed program has its byte code
    before, started_s = os.times(), time.perf_counter()
    command = [sys.executable, *arguments]
    done = subprocess.run(command, capture_output=True, text=True, check=False, env=environment)
    wall_s, after = time.perf_counter() - started_s, os.times()
    if done.returncode:
        raise RuntimeError(f"rigd {' '.join(arguments)} ended with {done.returncode}: {done.stderr.strip()[-300:]}")
    cpu_s = after.children_user + after.children_system - before.children_user - before.children_system
    return Took(wall_s * 1e3, cpu_s * 1e3)
