"""Devices that lose power together, or say yes and do nothing: the live shell in virtual time, by the true plant."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd import app
from rigd.config import load_rig
from rigd.model.events import EventKind
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

CONFIGS = Path(__file__).resolve().parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
S = 1_000_000_000
RATING_BAR = 20.0


def rehearsed(*faults: FaultSpec, until_s: int = 600) -> app.DryRun:
    options = DryOptions(limit_ns=until_s * S)
    return app.dry_run(RIG, RECIPE, app.DrySettings(faults=faults, options=options, deep=True))


def delivering(done: app.DryRun) -> list[float]:
    truth = done.plant.truth()
    return [truth[f"delivering:{pump.id}"] for pump in done.program.rig.pumps]


def peak_bar(done: app.DryRun) -> float:
    return max(bar for name, bar in done.plant.truth().items() if name.startswith("peak-pressure:"))


@pytest.mark.slow
def test_all_devices_power_cycled_at_once_end_in_a_stop_and_nothing_starts_again_by_itself() -> None:
    rig = load_rig(RIG)
    faults = [FaultSpec("device-reboot", device.id, onset_s=120.0, magnitude=3.0) for device in rig.devices]
    done = rehearsed(*faults)
    assert done.result.outcome == "tripped"
    assert delivering(done) == [0.0, 0.0]
    trips = [event for event in done.result.events if event.kind is EventKind.TRIP]
    assert trips[0].t_ns < 122 * S
    restarted = {event.subject for event in trips if event.subject.startswith("POWER-")}
    assert {"POWER-pump-a", "POWER-pump-b", "POWER-chiller"} <= restarted


@pytest.mark.slow
def test_a_pump_that_says_ok_and_does_not_stop_is_told_and_named() -> None:
    """A trip while PU-A only pretends: its stop is repeated and never called confirmed, and a person is told."""
    done = rehearsed(
        FaultSpec("device-pretends", "pump-a", onset_s=60.0),
        FaultSpec("device-silent", "sensors", onset_s=62.0),
        until_s=100,
    )
    told = [event for event in done.result.events if event.kind is EventKind.ALARM and event.fields.get("announce")]
    assert any(event.subject == "STOP-UNCONFIRMED" and "PU-A" in event.text for event in told)
    assert done.result.outcome != "done"
    confirmed = [event for event in done.result.events if event.kind is EventKind.STOP and "confirmed" in event.text]
    assert all(event.t_ns > 90 * S for event in confirmed)  # its syringe is empty then, and it truly stands
    assert peak_bar(done) < RATING_BAR


@pytest.mark.slow
@pytest.mark.parametrize("gain", [14.504, 1 / 14.504])
def test_a_pressure_in_psi_taken_for_bar_is_stopped_or_seen_in_the_leak_test(gain: float) -> None:
    """1 bar is 14.504 psi (NIST SP 811, appendix B.8). Too high trips; too low never reaches the test pressure."""
    done = rehearsed(*(FaultSpec("gain", tag, magnitude=gain) for tag in ("PT-1", "PT-2")), until_s=2400)
    assert done.result.outcome != "done"
    assert peak_bar(done) < RATING_BAR
    assert delivering(done) == [0.0, 0.0]
