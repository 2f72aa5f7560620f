"""Time to start: ``rigd --help`` and ``rigd check`` beside an interpreter that does nothing, in turn."""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Iterator, Sequence
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


def start_figures(scale: Scale) -> Iterator[Figure]:
    """Wall time from starting the process to its end."""
    times = start_times(scale.pick(1, 15, 40))
    floor_ms = median(times["floor"])
    for name, what, most_ms in (("help", "rigd --help", 150), ("check", "rigd check, 8 h sweep", 400)):
        yield Figure(
            f"start.{name}",
            what,
            "ms",
            median(times[name]),
            floor_ms,
            "python -c pass",
            Target(value_max=most_ms),
            f"median of {len(times[name])}, quickest {min(times[name]):.0f} ms",
        )


def start_times(rounds: int) -> dict[str, list[float]]:
    """Times of all commands [ms], in turn, after one unmeasured round that fills the disk cache."""
    times: dict[str, list[float]] = {name: [] for name in COMMANDS}
    for number in range(rounds + 1):
        for name, arguments in COMMANDS.items():
            took_ms = _run(arguments)
            if number:
                times[name].append(took_ms)
    return times


def _run(arguments: Sequence[str]) -> float:
    t0 = time.perf_counter()
    done = subprocess.run([sys.executable, *arguments], capture_output=True, text=True, check=False)
    took_ms = (time.perf_counter() - t0) * 1e3
    if done.returncode:
        raise RuntimeError(f"rigd {' '.join(arguments)} ended with {done.returncode}: {done.stderr.strip()[-300:]}")
    return took_ms
