"""What the plant says and refuses: pumps, valves, chiller, sensors, spectra (states: sim/MANUAL.md)."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, column_rig, pump, tracer, two_pump_rig

from rigd.model.devices import PUMP_CHANNELS, PumpState
from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd.ports.plant import Plant
from rigd_sim.plant import RigPlant
from rigd_sim.plant.infrared import GRID, absorptivity
from rigd_sim.plant.instruments import CODE_HIGH, CODE_LOW


def fresh() -> RigPlant:
    """The demonstration rig at rest."""
    return RigPlant(two_pump_rig(), 1)


def channels(plant: RigPlant, device: str = "pump-a") -> dict[str, float]:
    """All channels of a pump."""
    return {r.channel: r.value for r in plant.read(device, PUMP_CHANNELS)}


def single() -> RigPlant:
    """A rig with one single-syringe pump."""
    return RigPlant(column_rig(tracer(), Packing("x", True, 0.2, 0.4)), 1)


def test_plant_fits_its_port() -> None:
    """mypy holds the signatures; this holds that it is one."""
    plant: Plant = fresh()
    assert plant.truth()["pressure:TEE"] == 0.0


def test_dual_pump_fills_standby_and_changes_over_by_itself() -> None:
    """Deliver past the end of one syringe: the other takes over without an order, the counter runs through."""
    plant = fresh()
    assert plant.tell("PU-A", Action.DELIVER, 1.0) == "state"  # nothing in either syringe
    assert plant.tell("PU-A", Action.FILL, 5.0) == ""
    assert plant.tell("PU-A", Action.FILL, 4.0) == "state"  # that syringe is moving
    plant.advance(60 * S_NS)
    assert channels(plant) == pytest.approx({"flow": 0, "level": 0, "standby": 5.0, "delivered": 0, "state": 0})
    assert plant.tell("PU-A", Action.DELIVER, 4.0) == ""
    assert plant.tell("PU-A", Action.FILL, 5.0) == ""
    plant.advance(120 * S_NS)
    now = channels(plant)
    assert now["delivered"] == pytest.approx(4.0)
    assert (now["level"], now["standby"], now["state"]) == pytest.approx((1.0, 5.0, 1))
    plant.advance(150 * S_NS)
    now = channels(plant)
    assert (now["level"], now["standby"]) == pytest.approx((4.0, 0.0), abs=1e-6)
    plant.advance(250 * S_NS)
    now = channels(plant)
    assert (now["state"], now["flow"]) == (PumpState.EMPTY, 0.0)
    assert now["delivered"] == pytest.approx(10.0)
    assert plant.tell("PU-A", Action.DELIVER, 1.0) == "state"
    assert plant.tell("PU-A", Action.SWAP, 0.0) == "state"


def test_single_pump_is_interrupted_by_filling() -> None:
    """Refilling is a state; no rate is taken in it; a stop ends it where it is."""
    plant = single()
    assert plant.tell("PU", Action.SWAP, 0.0) == "state"
    assert plant.tell("PU", Action.FILL, 60.0) == "value"
    assert plant.tell("PU", Action.FILL, 20.0) == ""
    plant.advance(60 * S_NS)
    now = channels(plant, "pump")
    assert now["state"] == PumpState.REFILLING
    assert now["level"] == pytest.approx(8.0)
    assert plant.tell("PU", Action.DELIVER, 1.0) == "state"
    assert plant.tell("PU", Action.STOP, 0.0) == ""
    plant.advance(70 * S_NS)
    assert channels(plant, "pump")["level"] == pytest.approx(8.0)
    assert plant.tell("PU", Action.DELIVER, 1.0) == ""
    assert plant.tell("PU", Action.FILL, 20.0) == "state"


def test_ranges_are_refused() -> None:
    """Rates, volumes, positions, set-points out of range; words that a unit does not know."""
    plant = fresh()
    assert plant.tell("PU-A", Action.DELIVER, 99.0) == "value"
    assert plant.tell("PU-A", Action.MOVE, 1.0) == "word"
    assert plant.tell("V-A", Action.MOVE, 7.0) == "value"
    assert plant.tell("V-A", Action.MOVE, 0.5) == "value"
    assert plant.tell("CH", Action.SET_TEMPERATURE, 300.0) == "value"
    assert plant.tell("CH", Action.FILL, 1.0) == "word"
    assert plant.tell("nobody", Action.STOP, 0.0) == "word"


def test_valve_takes_its_time() -> None:
    """Moving for one second, shut in the middle, then there."""
    plant = fresh()
    seen = []
    plant.tell("V-A", Action.MOVE, 1.0)
    for tenths in range(12):
        plant.advance(tenths * S_NS // 10)
        seen.append((plant.read("valve-a", ["position"])[0].value, plant.truth()["position:V-A"]))
    assert seen[1] == (-1.0, 0.0)
    assert seen[5] == (-1.0, -1.0)
    assert seen[7] == (-1.0, 1.0)
    assert seen[11] == (1.0, 1.0)


def test_a_stop_stops_flow_and_pressure_stays() -> None:
    """The motor stops at once; the outlet flow ends within its time constant; the regulator keeps the pressure."""
    plant = fresh()
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.tell("PU-A", Action.DELIVER, 2.0)
    plant.advance(90 * S_NS)
    plant.tell("PU-A", Action.STOP, 0.0)
    assert channels(plant)["flow"] == 0.0
    plant.advance(100 * S_NS)
    truth = plant.truth()
    assert abs(truth["flow:L-6"]) < 0.01
    assert truth["pressure:TEE"] == pytest.approx(2.0, abs=0.05)


def test_sensor_noise_lag_and_code() -> None:
    """Noise as declared, code and value tell the same, 10000..50000 over the span."""
    plant = fresh()
    plant.advance(S_NS)
    values = np.array([plant.read("sensors", ["p1"])[0].value for _ in range(2000)])
    assert values.std() == pytest.approx(0.01, rel=0.1)
    assert values.mean() == pytest.approx(0.0, abs=0.002)
    reading = plant.read("sensors", ["p1"])[0]
    assert reading.raw is not None
    assert reading.value == pytest.approx(25.0 * (reading.raw - CODE_LOW) / (CODE_HIGH - CODE_LOW))
    assert math.isnan(plant.read("sensors", ["p9"])[0].value)


def test_first_order_lag_of_a_temperature_sensor() -> None:
    """A step of the truth is followed with the declared time constant of 3 s."""
    plant = fresh()
    plant.advance(S_NS)
    sensor = plant.instruments.by_tag["TT-1"]
    bed = plant.contents.beds["COL"]
    plant.thermal.advance = lambda *_: None  # type: ignore[method-assign]
    plant.contents.temperature[bed.start : bed.start + bed.cells] += 10.0
    plant.advance(4 * S_NS)
    assert sensor.shown == pytest.approx(22.0 + 10.0 * -math.expm1(-1.0), abs=1e-6)


def test_bore_error_is_squared_in_flow() -> None:
    """A 2 % wrong bore is 4 % of flow (exact): the counter cannot know."""
    rig = two_pump_rig()
    plant = RigPlant(rig, 1)
    plant.levers.pump("PU-A").gain = 1.02**2
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.tell("PU-A", Action.DELIVER, 1.0)
    plant.advance(90 * S_NS)
    assert plant.truth()["flow:L-A3"] == pytest.approx(1.0404, rel=1e-4)
    assert channels(plant)["flow"] == 1.0


def test_ripple_has_the_period_of_one_screw_turn() -> None:
    """10.30 mm bore, 1 mm pitch, 1 mL/min: 5.0 s (exact geometry); its mean is zero."""
    plant = fresh()
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.levers.pump("PU-A").ripple = 0.2
    plant.tell("PU-A", Action.DELIVER, 1.0)
    plant.advance(70 * S_NS)
    flows = []
    for _ in range(500):
        plant.advance(plant.now_ns + S_NS // 10)
        flows.append(plant.truth()["flow:L-A3"])
    wave = np.array(flows) - np.mean(flows)
    assert np.mean(flows) == pytest.approx(1.0, rel=2e-3)
    spectrum = np.abs(np.fft.rfft(wave))
    assert 50.0 / int(np.argmax(spectrum)) == pytest.approx(5.0, rel=0.02)
    assert wave.max() > 0.1


def test_backlash_costs_its_volume() -> None:
    """0.05 mL of play at 1 mL/min: 3 s without flow after a change-over."""
    plant = fresh()
    plant.levers.pump("PU-A").slack = 0.05e-6
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.tell("PU-A", Action.DELIVER, 1.0)
    plant.advance(62 * S_NS)
    assert plant.truth()["flow:L-A3"] == pytest.approx(0.0, abs=1e-6)
    plant.advance(80 * S_NS)
    assert plant.truth()["flow:L-A3"] == pytest.approx(1.0, rel=0.02)


def test_spectrum_is_beer_lambert() -> None:
    """A = path sum c eps with Lorentzian bands: 17 mol/L ethanol, 20 L/(mol cm) at 1047, 25 um: 0.85 AU."""
    plant = fresh()
    assert plant.spectrum("ir").absorbance == ()
    plant.advance(6 * S_NS)
    spectrum = plant.spectrum("ir")
    assert (spectrum.t_ns, spectrum.start_per_cm, spectrum.step_per_cm) == (5 * S_NS, 860.0, 4.0)
    eps = absorptivity(plant.rig.chemistry)[0]
    expected = 17e3 * eps * 25e-6
    assert expected.max() == pytest.approx(17.0 * 20.0 * 25e-4, rel=0.02)
    assert np.abs(np.array(spectrum.absorbance) - expected).max() < 3e-3
    assert plant.spectrum("ir") is spectrum
    assert GRID[-1] == 1800.0


def test_cell_averages_over_its_acquisition() -> None:
    """A composition that changes within five seconds is seen as its mean, and smeared by the cell's 40 uL."""
    plant = fresh()
    row = plant.contents.node_c[plant.layout.node_index["IR"]]
    plant.advance(7 * S_NS)
    row[1] = 1000.0
    plant.advance(11 * S_NS)
    mean = plant.infrared["ir"].mean
    assert mean is not None
    assert mean[1] == pytest.approx(600.0, rel=0.01)  # three of the five seconds from 5 to 10


def test_truth_differs_from_the_declared_rig_where_the_file_says_so() -> None:
    """``simulation.truth`` changes the plant and not what the daemon reads."""
    rig = two_pump_rig(**{"PU-A.compliance_mL_bar": 0.05, "COL.voidage": 0.5})
    plant = RigPlant(rig, 1)
    assert plant.layout.pumps["PU-A"].compliance_mL_bar == 0.05
    assert rig.pumps[0].compliance_mL_bar == 0.01
    assert plant.layout.columns["COL"].packing.voidage == 0.5


def test_bottle_runs_dry_and_draws_air() -> None:
    """A bottle with 2 mL gives 2 mL and then air; its volume never goes below zero."""
    rig = two_pump_rig()
    small = replace(rig.vessels[0], content_mL=2.0)
    plant = RigPlant(replace(rig, vessels=(small, *rig.vessels[1:])), 1)
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    truth = plant.truth()
    assert 0.0 <= truth["volume:bottle-S"] < 0.02
    syringe = plant.layout.node_index["PU-A.syringe2"]
    line_liquid = 0.39 + 0.12
    gas = plant.contents.node_c[syringe, plant.contents.gas] * plant.contents.node_volume[syringe] * 1e6
    assert gas == pytest.approx(5.0 - 2.0 - line_liquid, abs=0.35)


def test_pump_without_force_limit_stalls_above_its_rating() -> None:
    """Assumption of the plant: 1.25 times the rating."""
    assert RigPlant(two_pump_rig(), 1).pumps["PU-A"].stall_pressure == pytest.approx(25e5)
    assert pump("X").rating_bar == 20.0
