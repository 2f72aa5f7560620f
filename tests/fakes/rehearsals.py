"""Dry runs of the example rig with a fault, in a form that other processes can be asked for."""

from __future__ import annotations

from pathlib import Path

from rigd.app import DrySettings, dry_run
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

RIG = Path(__file__).parents[2] / "configs" / "rigs" / "two-pump-column.toml"
ONSET_S = 800.0
LONGEST_NS = 2 * 3_600_000_000_000
MAGNITUDES = {
    "wrong-bore": 1.05, "bubble": 0.2, "small-flask": 0.5, "siphon": 0.2, "valve-slow": 20.0, "exotherm": 8.0,
    "detached": 60.0, "room": -15.0, "gain": 1.5, "leak": 0.2,
}  # fmt: skip


def rehearse_with(kind: str, target: str, recipe: str) -> tuple[str, str, list[float], tuple[str, ...]]:
    """Kind, outcome, all numbers of the true plant at the end, and what tripped."""
    fault = FaultSpec(kind, target, onset_s=ONSET_S, magnitude=MAGNITUDES.get(kind, 1.0))
    run = dry_run(RIG, Path(recipe), DrySettings(faults=(fault,), options=DryOptions(limit_ns=LONGEST_NS)))
    numbers = [*run.plant.truth().values(), *run.result.peak.values()]
    trips = tuple(event.subject for event in run.result.events if str(event.kind) == "trip")
    return kind, run.result.outcome, numbers, trips
