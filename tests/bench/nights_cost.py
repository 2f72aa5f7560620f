"""Many dry runs of an 8 h night on all cores, beside the same nights one after the other in one process.

The floor is what the machine itself gives: as many plain processes as there are cores, each with its own share of the
nights and nothing to say to the others. All three are processes that start from nothing, so that imports count alike.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

from bench.figures import Figure, Scale, Target
from bench.start_time import CONFIGS, RIG

SPEED_UP_MIN = 1.8
_JOBS = """
import json, sys
from pathlib import Path
from rigd.config.varied import read_nights
from rigd.nights.campaign import jobs_of, on_this_machine
from rigd.nights.night import run_night

def main():
    file, first, step, workers = sys.argv[1], *map(int, sys.argv[2:5])
    jobs = jobs_of(read_nights(Path(file)))[first::step]
    rows = list(on_this_machine(jobs, workers)) if workers else [run_night(job) for job in jobs]
    print(json.dumps([[row["night"], row["outcome"], row["digest"]] for row in rows]))

if __name__ == "__main__":
    main()
"""
Nights = list[list[object]]


def nights_figures(scale: Scale) -> Iterator[Figure]:
    """How many times faster a campaign is on all cores."""
    count, cores = scale.pick(2, 24, 200), os.cpu_count() or 1
    with tempfile.TemporaryDirectory(prefix="rigd-bench-") as folder:
        file = _campaign(Path(folder), count, "overnight-sweep" if scale else "demo-sweep")
        one_s, expected = _measured(Path(folder), file, ((0, 1, 0),))
        plain_s, apart = _measured(Path(folder), file, tuple((first, cores, 0) for first in range(cores)))
        pool_s, pooled = _measured(Path(folder), file, ((0, 1, cores),))
    assert expected == apart == pooled, "the nights of a campaign hang on how they are spread"
    yield Figure(
        "nights",
        "campaign on all cores against one",
        "x",
        one_s / pool_s,
        one_s / plain_s,
        f"{cores} plain processes",
        Target(value_min=SPEED_UP_MIN) if cores > 1 and scale else Target(),
        note=f"{count} nights of {'8 h' if scale else 'the demonstration'}, {60 * count / pool_s:.1f} a minute",
        detail={"one_s": one_s, "plain_s": plain_s, "pool_s": pool_s, "cores": cores, "nights": count},
    )


def _campaign(folder: Path, count: int, recipe: str) -> Path:
    file = folder / "nights.toml"
    file.write_text(
        f'schema = "rigd-nights-1"\nname = "bench"\nrig = "{RIG}"\n'
        f'recipe = "{CONFIGS / "recipes" / recipe}.toml"\nnights = {count}\nseed = 1\n',
        encoding="utf-8",
    )
    return file


def _measured(folder: Path, file: Path, shares: tuple[tuple[int, int, int], ...]) -> tuple[float, Nights]:
    """Seconds until processes with these shares (first, step, workers) have all ended, and all their nights."""
    program = folder / "jobs.py"  # a file: the workers of a pool read the main program again
    program.write_text(_JOBS, encoding="utf-8")
    began_s = time.monotonic()
    started = [
        subprocess.Popen([sys.executable, str(program), str(file), *map(str, share)], stdout=subprocess.PIPE, text=True)
        for share in shares
    ]
    told = [process.communicate()[0] for process in started]
    took_s = time.monotonic() - began_s
    assert all(process.returncode == 0 for process in started), "a process of the campaign failed"
    return took_s, sorted((night for text in told for night in json.loads(text)), key=lambda night: night[0])
