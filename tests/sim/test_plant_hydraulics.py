"""Pressures and flows of the plant: closed forms, stiff and soft, any step of the caller."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, column_rig, line, pump, rig_of, tracer, two_pump_rig

from rigd.model.devices import PumpState
from rigd.model.orders import Action
from rigd.model.rig import Liquid, LiquidRole, Packing, RigDefinition, Valve, Vessel, VesselRole
from rigd.ports.plant import FaultSpec
from rigd_sim.faults import EFFECTS
from rigd_sim.physics.constants import ATMOSPHERE_PA
from rigd_sim.physics.properties import SOLVENTS
from rigd_sim.physics.tubing import resistance
from rigd_sim.plant import RigPlant, rig_plant

MIN_NS = 60 * S_NS


def dead_end_rig(compliance_mL_bar: float) -> RigDefinition:
    """One pump, one tube, one valve with a shut position, one flask."""
    liquids = (Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),)
    return rig_of(
        tracer(),
        liquids,
        vessels=(Vessel("bottle", VesselRole.SUPPLY, 1000, 900, "solvent"), Vessel("flask", VesselRole.COLLECT, 200)),
        pumps=(pump("PU", 1, compliance_mL_bar=compliance_mL_bar, rating_bar=200.0),),
        valves=(Valve("V", "valve", ("open", "shut"), "open", 0.5, 20.0),),
        lines=(
            line("L-0", "bottle", "PU", 1.0, 100.0),
            line("L-1", "PU", "V", 0.5, 1000.0),
            line("L-2", "V.open", "flask", 1.0, 100.0),
        ),
    )


def filled(rig: RigDefinition, **options: object) -> RigPlant:
    """A plant whose pumps are all full."""
    plant = RigPlant(rig, 1, EFFECTS)
    for name in plant.pumps:
        plant.tell(name, Action.FILL, 5.0)
    plant.advance(MIN_NS)
    for name, unit in plant.pumps.items():
        if unit.spec.syringes > 1:
            plant.tell(name, Action.SWAP, 0.0)
    return plant


@pytest.mark.parametrize(("q", "c"), [(0.1, 0.01), (2.0, 0.005), (1.0, 0.05), (0.5, 0.2)])
@pytest.mark.parametrize("step_s", [0.01, 0.2, 1.0, 20.0])
def test_dead_head_rises_at_q_over_c(q: float, c: float, step_s: float) -> None:
    """dP/dt = Q/C (exact), at any step; C is the pump's plus the little that the liquid itself gives."""
    plant = filled(dead_end_rig(c))
    plant.tell("V", Action.MOVE, 1)
    plant.advance(plant.now_ns + S_NS)
    total = sum(n.compliance for n in plant.layout.nodes if n.hydraulic and not n.ground and n.id != "PU.in")
    assert total == pytest.approx(c * 1e-11, rel=0.05)
    plant.tell("PU", Action.DELIVER, q)
    start, p0 = plant.now_ns, plant.truth()["pressure:PU"]
    while plant.now_ns < start + 20 * S_NS:
        plant.advance(plant.now_ns + round(step_s * S_NS))
        slope = (plant.truth()["pressure:PU"] - p0) / ((plant.now_ns - start) / S_NS)
        assert slope == pytest.approx(q * 1e-6 / 60 / total * 1e-5, rel=1e-3)
        if plant.truth()["pressure:PU"] > 60:
            break


def test_line_drop_is_hagen_poiseuille() -> None:
    """128 mu L Q / (pi d^4) over the tube, water at room temperature (viscosity of IAPWS R12-08)."""
    plant = filled(dead_end_rig(0.01))
    plant.tell("PU", Action.DELIVER, 1.0)
    plant.advance(plant.now_ns + 30 * S_NS)
    truth = plant.truth()
    mu = SOLVENTS["water"].viscosity(295.15)
    expected = resistance(mu, 1.0, 0.5e-3) * 1e-6 / 60
    assert (truth["pressure:PU"] - truth["pressure:V"]) * 1e5 == pytest.approx(expected, rel=1e-5)
    assert truth["flow:L-1"] == pytest.approx(1.0, rel=1e-6)


def test_soft_pump_follows_its_time_constant() -> None:
    """First-order rise P = R Q (1 - exp(-t/RC)), RC = 5 s, at the internal tolerance of 1 mbar + 0.05 %."""
    rig = dead_end_rig(1.0)
    rig = replace(rig, lines=(rig.lines[0], line("L-1", "PU", "V", 0.2, 8000.0), rig.lines[2]))
    plant = filled(rig)
    r = resistance(SOLVENTS["water"].viscosity(295.15), 8.0, 0.2e-3)
    tau = r * 1e-11
    plant.tell("PU", Action.DELIVER, 0.2)
    start = plant.now_ns
    for seconds in (1.0, 3.0, 10.0, 30.0):
        plant.advance(start + round(seconds * S_NS))
        expected = r * 0.2e-6 / 60 * -math.expm1(-seconds / tau) / 1e5
        assert plant.truth()["pressure:PU"] == pytest.approx(expected, rel=5e-3, abs=2e-3)


def test_trajectory_does_not_depend_on_the_callers_step() -> None:
    """The same minute with steps of 10 ms, 0.2 s and 60 s: pressures, levels and outlet amounts agree."""
    ends = []
    for step_s in (0.01, 0.2, 60.0):
        plant = filled(two_pump_rig())
        plant.tell("PU-A", Action.DELIVER, 1.0)
        plant.tell("PU-B", Action.DELIVER, 0.5)
        plant.tell("V-A", Action.MOVE, 1)
        plant.tell("PU-A", Action.FILL, 3.0)
        end = plant.now_ns + MIN_NS
        while plant.now_ns < end:
            plant.advance(min(end, plant.now_ns + round(step_s * S_NS)))
        ends.append(plant.truth())
    for key, value in ends[0].items():
        for other in ends[1:]:
            assert other[key] == pytest.approx(value, rel=2e-3, abs=2e-3), key


def test_regulator_holds_its_set_pressure() -> None:
    """Before a back-pressure regulator stand its set pressure and the drop of its seat; nothing flows backward."""
    plant = filled(two_pump_rig())
    plant.tell("PU-A", Action.DELIVER, 0.5)
    plant.advance(plant.now_ns + MIN_NS)
    truth = plant.truth()
    assert truth["pressure:BPR.in"] - truth["pressure:BPR.out"] == pytest.approx(2.0 + 0.5 * 0.05, rel=1e-3)
    plant.tell("PU-A", Action.STOP, 0.0)
    plant.advance(plant.now_ns + MIN_NS)
    assert plant.truth()["pressure:TEE"] == pytest.approx(2.0, abs=0.02)
    assert plant.truth()["flow:L-4"] == pytest.approx(0.0, abs=1e-3)


def test_pressure_before_the_column_is_the_sum_of_its_parts() -> None:
    """Flow through tubes, bed and regulator in series: the drops add up and every line carries the sum of the pumps."""
    plant = filled(two_pump_rig())
    plant.tell("PU-A", Action.DELIVER, 1.2)
    plant.tell("PU-B", Action.DELIVER, 0.8)
    plant.advance(plant.now_ns + MIN_NS)
    truth = plant.truth()
    assert truth["flow:COL"] == pytest.approx(2.0, rel=1e-4)
    assert truth["flow:L-6"] == pytest.approx(2.0, rel=1e-4)
    assert truth["pressure:TEE"] > truth["pressure:COL.in"] > truth["pressure:IR"] > 2.0


def test_closed_flask() -> None:
    """P = P0 V/(V - Q t), isothermal ideal gas: 100 mL of gas, 0.5 mL/min, 10 and 30 min (1.0666 and 1.1921 bar)."""
    rig = dead_end_rig(0.01)
    flask = replace(rig.vessels[1], capacity_mL=100.0, vented=False)
    plant = filled(replace(rig, vessels=(rig.vessels[0], flask), pumps=(pump("PU", 1, stroke_mL=50.0),)))
    plant.tell("PU", Action.FILL, 20.0)
    plant.advance(plant.now_ns + 4 * MIN_NS)
    plant.tell("PU", Action.DELIVER, 0.5)
    start = plant.now_ns
    for minutes, absolute in ((10, 1.0666), (30, 1.1921)):
        plant.advance(start + minutes * MIN_NS)
        shown = plant.truth()["pressure:flask"] + ATMOSPHERE_PA / 1e5
        assert shown / (ATMOSPHERE_PA / 1e5) * 1.01325 == pytest.approx(absolute, rel=2e-3)


def test_leak_takes_its_share_and_nothing_is_lost() -> None:
    """The floor gets G P; pumped = collected + leaked + what pressure holds."""
    plant = filled(two_pump_rig())
    plant.inject(FaultSpec("leak", "TEE", magnitude=0.05))
    plant.tell("PU-A", Action.DELIVER, 1.0)
    plant.advance(plant.now_ns + MIN_NS)
    before = plant.truth()
    plant.advance(plant.now_ns + 2 * MIN_NS)
    after = plant.truth()
    leaked = after["volume:floor"] - before["volume:floor"]
    collected = after["volume:waste"] - before["volume:waste"]
    assert leaked == pytest.approx(2 * 0.05 * after["pressure:TEE"], rel=0.01)
    assert leaked + collected == pytest.approx(2.0, rel=1e-3)


def test_stop_against_pressure_flows_back_through_a_leaking_check_valve() -> None:
    """With the outlet shut, pressure stays; with a leaking check valve it runs back into the bottle."""
    falls = []
    for leaking in (False, True):
        plant = filled(two_pump_rig())
        plant.tell("PU-A", Action.DELIVER, 1.0)
        plant.advance(plant.now_ns + MIN_NS)
        plant.tell("PU-A", Action.STOP, 0.0)
        if leaking:
            plant.inject(FaultSpec("backflow", "PU-A", magnitude=0.05))
        plant.advance(plant.now_ns + MIN_NS)
        falls.append(plant.truth()["pressure:TEE"])
    assert falls[0] == pytest.approx(2.0, abs=0.05)
    assert falls[1] < 1.0


def test_siphon() -> None:
    """A bottle that stands 0.05 bar high runs into the flask through an open way, by Hagen-Poiseuille."""
    liquids = (Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),)
    rig = rig_of(
        tracer(),
        liquids,
        vessels=(Vessel("high", VesselRole.SUPPLY, 1000, 500, "solvent"), Vessel("low", VesselRole.COLLECT, 200)),
        lines=(line("L", "high", "low", 0.5, 1000.0),),
    )
    plant = RigPlant(rig, 1, EFFECTS)
    plant.inject(FaultSpec("siphon", "high", magnitude=0.05))
    plant.advance(MIN_NS)
    expected = 0.05e5 / resistance(SOLVENTS["water"].viscosity(295.15), 1.0, 0.5e-3) * 60e6
    assert plant.truth()["flow:L"] == pytest.approx(expected, rel=1e-6)
    assert plant.truth()["volume:low"] == pytest.approx(expected, rel=1e-3)


def test_stall_at_force_over_area() -> None:
    """200 N on a 10.30 mm piston: 24.00 bar (exact geometry)."""
    rig = dead_end_rig(0.01)
    plant = filled(replace(rig, pumps=(replace(rig.pumps[0], force_limit_N=200.0),)))
    plant.tell("V", Action.MOVE, 1)
    plant.tell("PU", Action.DELIVER, 2.0)
    plant.advance(plant.now_ns + 20 * S_NS)
    truth = plant.truth()
    assert plant.pumps["PU"].state is PumpState.STALLED
    assert 24.0 < truth["peak-pressure:PU"] < 24.0 + 2.0 / 60 / 0.01 * 1.05  # at most one second of rise beyond
    assert plant.tell("PU", Action.DELIVER, 1.0) == "stalled"
    assert plant.tell("PU", Action.STOP, 0.0) == ""


def test_fill_through_a_shut_valve_draws_air_not_liquid() -> None:
    """Suction cannot go below vacuum: behind a block the syringe gets gas at 0.9 bar below the room."""
    rig = dead_end_rig(0.01)
    plant = RigPlant(rig, 1, EFFECTS)
    plant.inject(FaultSpec("block", "L-0"))
    plant.tell("PU", Action.FILL, 2.0)
    plant.advance(MIN_NS)
    syringe = plant.layout.node_index["PU.syringe1"]
    assert plant.contents.node_c[syringe, plant.contents.gas] > 0.8
    assert plant.truth()["volume:bottle"] == pytest.approx(900.0, abs=0.1)


def test_gel_bed_story() -> None:
    """Packed dry and wetted with a good solvent the bed runs away; packed swollen with headspace it does not.

    Common practice: pack swollen and leave room. Polystyrene gel, toluene: 5.3 mL/g against 1 dry (from memory, 15 %).
    """
    gel = Packing("gel, 1 % cross-linked", True, 0.075, 0.38, 0.4, swelling=5.3, swell_s=120.0)
    drops: dict[str, list[float]] = {}
    for story, truth in (("dry", {"COL.packed_dry": 1.0}), ("swollen", {"COL.headspace": 0.15})):
        rig = column_rig(tracer(), gel)
        rig = replace(rig, simulation=replace(rig.simulation, truth=truth))
        plant = filled(replace(rig, pumps=(replace(rig.pumps[0], compliance_mL_bar=0.02),)))
        plant.tell("PU", Action.DELIVER, 0.5)
        drops[story] = []
        for _ in range(9):
            plant.advance(plant.now_ns + MIN_NS)
            drops[story].append(plant.truth()["pressure:COL.in"])
    assert max(drops["swollen"]) < 0.2
    assert drops["dry"][0] < 0.2
    assert drops["dry"][-1] > 10 * max(drops["swollen"])
    assert drops["dry"][-1] > 20 * drops["dry"][0]


def test_compression_bends_the_pressure_upward() -> None:
    """A soft bed drops more than in proportion to flow; a hard one drops in proportion."""
    ratios = []
    for softness in (0.0, 0.05):
        soft = Packing("soft", True, 0.03, 0.38, 0.0, compressibility_per_bar=softness)
        plant = filled(column_rig(tracer(), soft))
        drops = []
        for q in (0.2, 2.0):
            plant.tell("PU", Action.DELIVER, q)
            plant.advance(plant.now_ns + 40 * S_NS)
            drops.append(plant.truth()["pressure:COL.in"] - plant.truth()["pressure:COL.out"])
        ratios.append(drops[1] / drops[0])
    assert ratios[0] == pytest.approx(10.0, rel=0.01)
    assert ratios[1] > 10.5


def test_time_cannot_go_back() -> None:
    """The plant refuses it with both times."""
    plant = RigPlant(dead_end_rig(0.01), 1)
    plant.advance(S_NS)
    with pytest.raises(ValueError, match="cannot go back"):
        plant.advance(0)
    assert np.isfinite(list(plant.truth().values())).all()


def test_calm_keeps_readings_within_its_tolerance() -> None:
    """In calm a pressure is not integrated until the next step of the liquid: it is late by at most 20 Pa (0.2 mbar),
    and counters and volumes are exact."""
    calm, never = filled(two_pump_rig()), filled(two_pump_rig())
    never._is_calm = lambda: False  # type: ignore[method-assign]
    skipped = 0
    for plant in (calm, never):
        plant.tell("PU-A", Action.DELIVER, 0.4)
        plant.tell("PU-B", Action.DELIVER, 0.3)
    for turn in range(1500):
        if turn == 900:
            for plant in (calm, never):
                plant.tell("PU-B", Action.DELIVER, 0.6)
        for plant in (calm, never):
            plant.advance(plant.now_ns + S_NS // 5)
        skipped += calm._solved_ns < calm.now_ns
        assert np.abs(calm.flows.pressure - never.flows.pressure).max() < rig_plant.CALM_PA + 5.0
        assert [r.value for r in calm.read("pump-a", ["delivered", "level"])] == pytest.approx(
            [r.value for r in never.read("pump-a", ["delivered", "level"])], rel=1e-9
        )
    assert skipped > 600
    assert calm.truth()["volume:waste"] == pytest.approx(never.truth()["volume:waste"], abs=1e-6)
