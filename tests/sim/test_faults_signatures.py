"""Every fault kind runs; the main ones show the signature of the hazard list (numbers H1 to H42)."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, two_pump_rig
from fakes.sim_running import Shown, on, running, shown

from rigd.model.devices import PumpState
from rigd.model.errors import ConfigError
from rigd.model.orders import Action
from rigd.ports.plant import FaultSpec
from rigd_sim.faults import EFFECTS, fault_kinds
from rigd_sim.plant import RigPlant

TARGETS = {
    "PU-A": 1.0, "V-A": 1.0, "V-C": 1.0, "COL": 1.0, "CH": 1.0, "IR": 1.0, "TEE": 1.0, "PT-1": 1.0, "TT-1": 1.0,
    "bottle-A": 1.0, "flask": 1.0, "pump-a": 1.0, "room": 1.0,
}  # fmt: skip
MAGNITUDES = {"slip": 0.3, "wrong-bore": 1.02, "bubble": 0.1, "small-flask": 5.0, "siphon": 0.2, "valve-slow": 20.0}


@pytest.mark.parametrize("kind", [k.kind for k in fault_kinds()])
def test_each_kind_runs_and_ends(kind: str) -> None:
    """Ten minutes of each fault from its onset: all numbers stay finite; after its end the rig is healthy again."""
    plant = running(4.0)
    effect = EFFECTS[kind]
    target = next(t for t in TARGETS if t in effect.targets(plant.rig))
    start_s = plant.now_ns / S_NS + 30.0
    plant.inject(FaultSpec(kind, target, start_s, 300.0, MAGNITUDES.get(kind, 1.0)))
    on(plant, 29.0)
    assert not plant.ailments.active(plant.now_ns / S_NS)
    on(plant, 120.0)
    assert plant.ailments.active(plant.now_ns / S_NS)
    assert np.isfinite(list(plant.truth().values())).all()
    on(plant, 400.0)
    assert not plant.ailments.active(plant.now_ns / S_NS)
    assert np.isfinite(list(plant.truth().values())).all()
    assert not math.isnan(shown(plant)["PT-1"])


def test_table_of_kinds() -> None:
    """At least forty kinds, each with words for target, magnitude and signals, and its hazard."""
    kinds = fault_kinds()
    assert len({k.kind for k in kinds}) == len(kinds) >= 40
    for kind in kinds:
        assert kind.title
        assert kind.target
        assert kind.signals
        assert kind.hazards
    covered = {int(h[1:]) for k in kinds for h in k.hazards}
    plant_can_show = set(range(1, 26)) | {32, 33, 35, 36, 37, 38, 39}
    assert plant_can_show - {9} <= covered  # 9, an empty syringe, needs no fault: deliver to the end


def test_unknown_kind_and_target_are_refused_with_what_is_allowed() -> None:
    """The message lists the allowed names."""
    plant = RigPlant(two_pump_rig(), 1, EFFECTS)
    with pytest.raises(ConfigError, match="no fault kind 'blok'"):
        plant.inject(FaultSpec("blok", "COL"))
    with pytest.raises(ConfigError, match="cannot hit 'COL'") as caught:
        plant.inject(FaultSpec("stall", "COL"))
    assert "PU-A" in caught.value.problems[0].remedy


def before_and_after(kind: str, target: str, magnitude: float, seconds: float) -> tuple[Shown, Shown, RigPlant]:
    """Signals before a fault and some time into it."""
    plant = running()
    before = shown(plant)
    plant.inject(FaultSpec(kind, target, magnitude=magnitude))
    on(plant, seconds)
    return before, shown(plant), plant


CASES: list[tuple[str, str, float, float, Callable[[Shown, Shown], bool]]] = [
    # H1: PT-1 up, PT-2 flat
    ("clog", "COL", 3.0, 120.0, lambda a, b: b["PT-1"] > a["PT-1"] + 0.3 and abs(b["PT-2"] - a["PT-2"]) < 0.1),
    # H2: PT-1 rises by Q/C (1 mL/min over 0.02 mL/bar = 0.8 bar/s), outlet flow ends
    ("block", "L-1", 1.0, 5.0, lambda a, b: 3.0 < b["PT-1"] - a["PT-1"] < 4.5 and b["flow:L-5"] < 0.05),
    # H3: both rise together
    ("block", "L-5", 1.0, 4.0, lambda a, b: b["PT-1"] > a["PT-1"] + 2 and b["PT-2"] > a["PT-2"] + 2),
    # H5: less arrives than is pumped
    ("leak", "TEE", 0.1, 60.0, lambda a, b: b["flow:L-5"] < 0.85 and b["volume:floor"] > 0.15),
    # H6: pressure to near nothing
    ("burst", "TEE", 1.0, 3.0, lambda a, b: b["PT-1"] < 0.1 * a["PT-1"]),
    # H8: flow ends, pump says stalled
    ("stall", "PU-A", 1.0, 10.0, lambda a, b: abs(b["flow:L-A3"]) < 0.02 and 0.4 < b["flow:L-1"] < 0.6),
    ("slip", "PU-A", 0.4, 60.0, lambda a, b: abs(b["flow:L-A3"] - 0.3) < 0.01),
    # H13: reagent in a solvent step needs a leaking valve; here solvent in a reagent step
    ("valve-leaks", "V-A", 0.5, 900.0, lambda a, b: b["amount:flask:acid"] > 0),
    # H15: jacket leaves the bath
    ("no-circulation", "CH", 1.0, 1200.0, lambda a, b: b["TT-2"] < a["TT-2"] - 5 and abs(b["temperature:CH"] - 60) < 1),
    # H16/H39: heater dead, everything drifts down
    ("no-heating", "CH", 1.0, 1200.0, lambda a, b: b["temperature:CH"] < a["temperature:CH"] - 1),
    # H18: bed above its jacket
    ("exotherm", "COL", 5.0, 120.0, lambda a, b: b["TT-1"] > a["TT-1"] + 4 and b["TT-1"] > b["TT-2"] + 4),
    ("full-heat", "CH", 1.0, 600.0, lambda a, b: b["temperature:CH"] > 80),
    # H20, H21, H22
    ("shorted", "TT-1", 1.0, 20.0, lambda a, b: abs(b["TT-1"] - 22) < 0.5),
    ("detached", "TT-1", 60.0, 60.0, lambda a, b: 30 < b["TT-1"] < 50),
    ("mirrored", "TT-1", 1.0, 20.0, lambda a, b: b["TT-1"] < 0),
    # H24
    ("offset", "PT-1", 0.7, 5.0, lambda a, b: abs(b["PT-1"] - a["PT-1"] - 0.7) < 0.05),
    ("drift", "PT-1", 1.0, 1800.0, lambda a, b: abs(b["PT-1"] - a["PT-1"] - 0.5) < 0.05),
    # H36: 0.002 to 0.04 bar/min; 250 mL headspace, 1 mL/min: 0.004 bar/min at first
    ("closed", "flask", 1.0, 600.0, lambda a, b: 0.03 < b["pressure:flask"] - a["pressure:flask"] < 0.06),
    # H35
    ("small-flask", "flask", 5.0, 60.0, lambda a, b: b["volume:flask"] <= 5.001 and b["volume:floor"] > 1),
    # conversion sinks
    ("poisoning", "COL", 0.7, 900.0, lambda a, b: b["conversion:COL"] < 0.7 * a["conversion:COL"]),
    ("channelling", "COL", 100.0, 900.0, lambda a, b: b["conversion:IR"] < 0.8 * a["conversion:IR"]),
]


@pytest.mark.parametrize(
    ("kind", "target", "magnitude", "seconds", "signature"), CASES, ids=[f"{c[0]}-{c[1]}" for c in CASES]
)
def test_signature(
    kind: str, target: str, magnitude: float, seconds: float, signature: Callable[[Shown, Shown], bool]
) -> None:
    """What the hazard list says that the signals do."""
    before, after, _ = before_and_after(kind, target, magnitude, seconds)
    moved = {k: (round(before[k], 3), round(after[k], 3)) for k in before if abs(before[k] - after[k]) > 1e-3}
    assert signature(before, after), moved


def test_frozen_sensor_shows_one_code_and_a_healthy_one_does_not() -> None:
    """H23: identical raw codes; without the fault more than half of successive codes differ (noise over one step)."""
    plant = running(2.0)
    healthy = [plant.read("sensors", ["p1"])[0].raw for _ in range(40)]
    assert len(set(healthy)) > 10
    plant.inject(FaultSpec("frozen", "PT-1"))
    codes = []
    for _ in range(40):
        on(plant, 1.0)
        codes.append(plant.read("sensors", ["p1"])[0].raw)
    assert len(set(codes)) == 1


@pytest.mark.parametrize(
    ("kind", "magnitude", "word"), [("open", 1, "OPEN"), ("out-of-span", 1, "HIGH"), ("out-of-span", -1, "LOW")]
)
def test_broken_sensors_say_so(kind: str, magnitude: float, word: str) -> None:
    """H19: the converter knows; the value is not a number."""
    plant = running(1.0)
    plant.inject(FaultSpec(kind, "PT-1", magnitude=magnitude))
    (reading,) = plant.read("sensors", ["p1"])
    assert reading.fault == word
    assert math.isnan(reading.value)


def test_pump_that_ignores_a_stop_goes_on() -> None:
    """H8: ok to the order, flow and counter go on."""
    plant = running(2.0)
    plant.inject(FaultSpec("ignores-stop", "PU-A"))
    assert plant.tell("PU-A", Action.STOP, 0.0) == ""
    before = plant.read("pump-a", ["delivered"])[0].value
    on(plant, 10.0)
    flow, state, delivered = (r.value for r in plant.read("pump-a", ["flow", "state", "delivered"]))
    assert flow == pytest.approx(0.5)
    assert state == PumpState.DELIVERING
    assert delivered > before + 0.05


def test_restart_is_silent_and_loses_what_was_set() -> None:
    """H17, H33: chiller at its default set-point and off, pump at rest with its counter at zero."""
    plant = running(2.0)
    for unit in ("CH", "PU-A"):
        plant.inject(FaultSpec("restart", unit))
    assert [r.value for r in plant.read("chiller", ["setpoint", "circulating"])] == [20.0, 0.0]
    assert [r.value for r in plant.read("pump-a", ["flow", "delivered", "state"])] == [0.0, 0.0, 0.0]


def test_bubble_makes_the_pressure_slow_and_spikes_the_spectrum() -> None:
    """H7: compliance V/P added; the base line jumps while the gas is in the cell."""
    plant = running(5.0)
    quiet = np.array(plant.spectrum("ir").absorbance)
    rest = plant.flows.compliance.sum()
    plant.inject(FaultSpec("bubble", "COL", magnitude=0.2))
    on(plant, 10.0)
    assert plant.flows.compliance.sum() > rest + 0.1e-6 / 5e5
    worst = 0.0
    for _ in range(90):
        on(plant, 5.0)
        worst = max(worst, float(np.abs(np.array(plant.spectrum("ir").absorbance) - quiet).max()))
    assert worst > 0.05


def test_silent_device_gives_no_value_and_takes_no_order() -> None:
    """H25, H33: every channel is bad, orders come back."""
    plant = running(1.0)
    plant.inject(FaultSpec("silent", "pump-a"))
    assert all(math.isnan(r.value) and r.fault for r in plant.read("pump-a", ["flow", "state"]))
    assert plant.tell("PU-A", Action.STOP, 0.0) == "no answer"
