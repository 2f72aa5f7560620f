"""A sudden block of the outlet in every phase of the recipe, judged by the true plant afterwards."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from rigd.app import DryRun, DrySettings, dry_run
from rigd.model.events import Event, EventKind
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

pytestmark = [pytest.mark.slow, pytest.mark.timeout(180)]

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
WEAKEST_BAR = 20.0
PHASES = ("prime", "conditioning", "switchover", "point-P01", "point-P04", "flush")


@cache
def healthy() -> tuple[Event, ...]:
    run = dry_run(RIG, RECIPE)
    assert run.result.outcome == "done"
    return tuple(run.result.events)


def seconds_into(phase: str) -> float:
    """When to block: well inside the phase, while its pumps deliver."""
    starts = [event.t_ns for event in healthy() if event.kind is EventKind.PHASE]
    start = next(e.t_ns for e in healthy() if e.kind is EventKind.PHASE and e.subject == phase)
    end = min((t for t in starts if t > start), default=start + 60_000_000_000)
    return (start + min(max(end - start, 30e9) / 2, 40e9)) / 1e9


def blocked(phase: str, kind: str = "block") -> DryRun:
    fault = FaultSpec(kind, "L-4", onset_s=seconds_into(phase))
    return dry_run(RIG, RECIPE, DrySettings(faults=(fault,)))


def test_pressure_that_is_trapped_after_the_leak_test_is_said() -> None:
    """H4: the outlet is open again, but a block keeps the pressure before it; the run holds and names it."""
    leak_test = next(e.t_ns for e in healthy() if e.kind is EventKind.PHASE and e.subject == "leak-test")
    fault = FaultSpec("block", "L-1", onset_s=leak_test / 1e9 + 36.0)
    run = dry_run(RIG, RECIPE, DrySettings(faults=(fault,), options=DryOptions(held_ns=60_000_000_000)))
    assert run.result.outcome == "stopped"
    assert "stand in the path all the same" in run.result.text
    assert any(e.kind is EventKind.PROMPT and e.subject == "pressure-trapped" for e in run.result.events)


@pytest.mark.parametrize("phase", PHASES)
def test_a_blocked_outlet_is_cut_before_the_rating(phase: str) -> None:
    run = blocked(phase)
    assert (run.result.outcome, run.result.exit_code) == ("tripped", 1)
    trips = [event for event in run.result.events if event.kind is EventKind.TRIP]
    assert trips[0].subject == "PRESSURE-HIGH"
    assert "first-out" in trips[0].text
    truth = run.plant.truth()
    peaks = {name: value for name, value in truth.items() if name.startswith("peak-pressure:")}
    assert 8.0 < max(peaks.values()) < WEAKEST_BAR
    assert abs(truth["flow:L-A3"]) < 0.05
    assert abs(truth["flow:L-B3"]) < 0.05
    positions = {e.subject: e.text for e in run.result.events if e.kind is EventKind.VALVE}
    assert "solvent" in positions["V-A"]
    assert "solvent" in positions["V-B"]
    assert "waste" in positions["V-C"]
