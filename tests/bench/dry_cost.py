"""Cost of a dry run of a whole recipe, beside the plant alone stepped the same way.

The floor is a plant of the same seed that is given the same commands at the same times and is advanced to the same
times, in the same order; nobody reads it and nobody decides anything.
"""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any
from unittest.mock import patch

from bench.figures import Figure, Scale, Target
from bench.start_time import CONFIGS, RIG

from rigd import app
from rigd.adapters.plugins import plant_maker
from rigd.config import load_rig
from rigd.model.orders import Action
from rigd.model.rig import RigDefinition
from rigd.model.samples import Reading, Spectrum
from rigd.ports.plant import Plant, PlantMaker
from rigd.runtime.dry import DryOptions

S = 1_000_000_000
AIM_x = 10_000
START_MAX_s = 5.0
NIGHT = "overnight"


@dataclass
class Recorder:
    """A plant that notes when it is moved and what it is told."""

    plant: Plant
    steps: list[tuple[Any, ...]] = field(default_factory=list)

    def advance(self, to_ns: int) -> None:
        self.steps.append((to_ns,))
        self.plant.advance(to_ns)

    def tell(self, unit: str, action: Action, value: float) -> str:
        self.steps.append((unit, action, value))
        return self.plant.tell(unit, action, value)

    def read(self, device: str, channels: Sequence[str]) -> Sequence[Reading]:
        return self.plant.read(device, channels)

    def spectrum(self, device: str) -> Spectrum:
        return self.plant.spectrum(device)

    def truth(self) -> Mapping[str, float]:
        return self.plant.truth()


@dataclass
class DryTimes:
    """CPU seconds of a dry run and of its plant alone, and what the run was."""

    dry_s: float
    plant_s: float
    wall_s: float
    process_s: float
    scans: int
    outcome: str


def dry_figures(scale: Scale) -> Iterator[Figure]:
    """Ratio to the plant, and how much faster than the clock."""
    recipe, limit_s = (("demo", 60), ("demo", 14_400), (NIGHT, 86_400))[scale]
    times = dry_times(recipe, limit_s)
    plan = f"{recipe}: {times.process_s / 3600:.2f} h, {times.scans} scans, {times.outcome}"
    yield Figure(
        "dry",
        "dry run of a sweep, CPU time",
        "s",
        times.dry_s,
        times.plant_s,
        "plant alone, stepped the same way",
        Target(ratio_max=3),
        plan,
        detail={"wall_s": times.wall_s},
    )
    yield Figure(
        "dry.speed",
        "dry run, times real time",
        "x",
        times.process_s / times.dry_s,
        times.process_s / times.plant_s,
        "plant alone",
        Target(value_min=AIM_x),
        "an aim" if recipe == NIGHT else "an aim; the 8 h night is measured by --full",
    )
    if scale is Scale.FULL:
        yield _command()


def dry_times(recipe: str, limit_s: int) -> DryTimes:
    """A rehearsal, then its plant alone."""
    made: list[Recorder] = []

    def make(rig: RigDefinition, seed: int) -> Plant:
        made.append(Recorder(plant_maker().make(rig, seed)))
        return made[0]  # type: ignore[return-value]

    warm_up()
    settings = app.DrySettings(options=DryOptions(limit_ns=limit_s * S))
    with patch.object(app, "plant_maker", lambda: PlantMaker("recorded", make, plant_maker().fault_kinds)):
        wall_s, cpu_s = time.perf_counter(), time.process_time()
        done = app.dry_run(RIG, CONFIGS / "recipes" / f"{recipe}-sweep.toml", settings)
        wall_s, cpu_s = time.perf_counter() - wall_s, time.process_time() - cpu_s
    rig = load_rig(RIG)
    alone = plant_maker().make(rig, rig.simulation.seed)
    plant_s = time.process_time()
    plant_alone(alone, made[0].steps)
    plant_s = time.process_time() - plant_s
    result = done.result
    assert dict(alone.truth()) == dict(made[0].truth()), "the plant alone did something else"
    return DryTimes(cpu_s, plant_s, wall_s, result.end_ns / S, result.scans, result.outcome)


def warm_up() -> None:
    """Load the plant's compiled kernels."""
    plant_maker().make(load_rig(RIG), 1).advance(2 * S)


def plant_alone(plant: Plant, steps: Sequence[tuple[Any, ...]]) -> None:
    """The floor."""
    advance: Callable[[int], None] = plant.advance
    for step in steps:
        if len(step) == 1:
            advance(step[0])
        else:
            plant.tell(*step)


def _command() -> Figure:
    """The command itself, process start included."""
    command = [sys.executable, "-m", "rigd", "dry-run", str(RIG), str(CONFIGS / "recipes" / "overnight-sweep.toml")]
    started_s = time.perf_counter()
    done = subprocess.run([*command, "--json"], capture_output=True, text=True, check=False)
    took_s = time.perf_counter() - started_s
    outcome = json.loads(done.stdout)["outcome"]
    return Figure(
        "dry.command", "rigd dry-run of the night, start included", "s", took_s, target=Target(value_max=START_MAX_s),
        note=f"wall time; {outcome}",
    )  # fmt: skip
