"""Relief valves, branches, blocked-in liquid, heights and soft beds of the plant against closed forms."""

from __future__ import annotations

import math
from dataclasses import replace

import fluids
import numpy as np
import pytest
from fakes.sim_rigs import S_NS, column_rig, line, pump, rig_of, tracer, two_pump_rig
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigd.model.orders import Action
from rigd.model.rig import Column, Liquid, LiquidRole, Packing, Relief, RigDefinition, Tee, Valve, Vessel, VesselRole
from rigd.ports.plant import FaultSpec
from rigd_sim.faults import EFFECTS
from rigd_sim.physics import packed_bed
from rigd_sim.physics.properties import SOLVENTS
from rigd_sim.physics.tubing import area, resistance
from rigd_sim.plant import RigPlant
from rigd_sim.plant.layout import column_liquid

WATER = (Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),)
MU = SOLVENTS["water"].viscosity(295.15)
DEAD_END = (
    line("L-0", "bottle", "PU", 1.0, 100.0),
    line("L-1", "PU", "V", 0.5, 1000.0),
    line("L-2", "V.open", "flask", 1.0, 100.0),
)


def dead_end(compliance_mL_bar: float, *reliefs: Relief, **changes: object) -> RigDefinition:
    """Bottle, pump, tube, valve with a shut position, flask and waste."""
    parts: dict[str, object] = {
        "vessels": (
            Vessel("bottle", VesselRole.SUPPLY, 1000, 900, "solvent"),
            Vessel("flask", VesselRole.COLLECT, 200),
            Vessel("waste", VesselRole.WASTE, 200),
        ),
        "pumps": (pump("PU", 1, compliance_mL_bar=compliance_mL_bar, rating_bar=200.0, stroke_mL=50.0),),
        "valves": (Valve("V", "valve", ("open", "shut"), "open", 0.5, 20.0),),
        "lines": DEAD_END,
    }
    return replace(rig_of(tracer(), WATER, **{**parts, **changes}), reliefs=reliefs)


def blocked(rig: RigDefinition, flow_mL_min: float) -> RigPlant:
    """The pump delivers against the shut valve."""
    plant = RigPlant(rig, 1, EFFECTS)
    plant.tell("PU", Action.FILL, 30.0)
    plant.advance(300 * S_NS)
    plant.tell("V", Action.MOVE, 1)
    plant.advance(plant.now_ns + 2 * S_NS)
    plant.tell("PU", Action.DELIVER, flow_mL_min)
    return plant


@pytest.mark.parametrize("compliance", [0.005, 0.05, 0.5])
def test_relief_opens_at_its_set_pressure_and_reseats(compliance: float) -> None:
    """Shut below the set pressure (rise Q/C), then between the two pressures; all that is pumped comes out there."""
    plant = blocked(dead_end(compliance, Relief("RV", "V", 10.0, 8.0, "waste", 20.0)), 2.0)
    start, opened, lows = plant.now_ns, 0.0, []
    while plant.now_ns < start + 200 * S_NS:
        plant.advance(plant.now_ns + S_NS // 10)
        truth = plant.truth()
        assert truth["pressure:V"] < 10.1
        if not opened and truth["flow:RV"] > 0.0:
            opened = (plant.now_ns - start) / S_NS
        if opened:
            lows.append(truth["pressure:V"])
    total = sum(n.compliance for n in plant.layout.nodes if n.hydraulic and not n.ground and n.id != "PU.in")
    assert opened == pytest.approx(10.0 * total * 1e5 / (2e-6 / 60), abs=0.11)
    assert min(lows) > 7.9
    plant.tell("PU", Action.STOP, 0.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    truth = plant.truth()
    assert 7.9 < truth["pressure:V"] < 10.0
    assert truth["flow:RV"] == 0.0
    before = truth["volume:waste"]
    plant.advance(plant.now_ns + 600 * S_NS)
    assert plant.truth()["volume:waste"] == before > 1.0


def test_relief_keeps_the_volume() -> None:
    """What leaves the bottle is in the syringe, in the waste or held by pressure: to 1e-9 of the rig's liquid."""
    plant = blocked(dead_end(0.01, Relief("RV", "PU", 5.0, 4.5, "waste", 10.0)), 3.0)
    plant.settle()
    before = plant.contents.totals()[-1]
    plant.advance(plant.now_ns + 300 * S_NS)
    plant.settle()
    assert plant.contents.totals()[-1] == pytest.approx(before, rel=1e-9)
    assert plant.truth()["volume:waste"] == pytest.approx(15.0, abs=0.2)


def test_relief_without_an_outlet_wets_the_floor() -> None:
    """ "" lets out on the floor."""
    plant = blocked(dead_end(0.01, Relief("RV", "PU", 5.0, 4.5)), 3.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    assert plant.truth()["volume:floor"] == pytest.approx(3.0, abs=0.1)


def test_flow_divides_at_a_tee_as_the_conductances() -> None:
    """Two open ways of 1 m and 3 m of the same tube carry 3 to 1 (Hagen, Poiseuille)."""
    lines = (
        line("L-0", "bottle", "PU", 1.0, 100.0),
        line("L-1", "PU", "TEE", 0.5, 500.0),
        line("L-2", "TEE", "flask", 0.5, 1000.0),
        line("L-3", "TEE", "waste", 0.5, 3000.0),
    )
    rig = dead_end(0.01, tees=(Tee("TEE", 0.01, 100.0),), valves=(), lines=lines)
    plant = RigPlant(rig, 1)
    plant.tell("PU", Action.FILL, 10.0)
    plant.advance(100 * S_NS)
    plant.tell("PU", Action.DELIVER, 2.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    truth = plant.truth()
    assert truth["flow:L-2"] / truth["flow:L-3"] == pytest.approx(3.0, rel=1e-6)
    both = 1.0 / (1.0 / resistance(MU, 1.0, 0.5e-3) + 1.0 / resistance(MU, 3.0, 0.5e-3))
    assert truth["pressure:TEE"] * 1e5 == pytest.approx(both * 2e-6 / 60, rel=1e-5)


def test_columns_in_parallel_and_in_series() -> None:
    """Beds add like resistances: equal ones share the flow, one after the other they add their drops (Ergun)."""
    packing = Packing("glass", False, 0.1, 0.38)
    columns = tuple(Column(f"COL-{i}", 5.0, 100.0, 40.0, packing) for i in range(3))
    lines = (
        line("L-0", "bottle", "PU", 1.0, 100.0),
        line("L-1", "PU", "TEE", 2.0, 10.0),
        *(line(f"L-{2 + i}", "TEE", f"COL-{i}", 2.0, 10.0) for i in range(2)),
        line("L-4", "COL-0", "COL-2", 2.0, 10.0),
        line("L-5", "COL-2", "flask", 2.0, 10.0),
        line("L-6", "COL-1", "waste", 2.0, 10.0),
    )
    rig = dead_end(0.01, tees=(Tee("TEE", 0.01, 100.0),), valves=(), columns=columns, lines=lines)
    plant = RigPlant(rig, 1)
    plant.tell("PU", Action.FILL, 10.0)
    plant.advance(100 * S_NS)
    plant.tell("PU", Action.DELIVER, 3.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    truth = plant.truth()
    assert truth["flow:COL-1"] == pytest.approx(2.0, rel=2e-3)
    assert truth["flow:COL-0"] == pytest.approx(1.0, rel=4e-3)
    assert truth["flow:COL-0"] == pytest.approx(truth["flow:COL-2"], rel=1e-9)
    u = 2e-6 / 60 / area(5e-3)
    drop = fluids.packed_bed.Ergun(1e-4, 0.38, u, SOLVENTS["water"].density(295.15), MU, 0.1)
    assert (truth["pressure:COL-1.in"] - truth["pressure:COL-1.out"]) * 1e5 == pytest.approx(drop, rel=5e-3)


@pytest.mark.parametrize(
    ("name", "library"),
    [
        ("ergun", fluids.packed_bed.Ergun),
        ("erdim", fluids.packed_bed.Erdim_Akgiray_Demir),
        ("carman-kozeny", lambda dp, e, u, rho, mu, length: 1.2 * fluids.packed_bed.Ergun(dp, e, u, 1e-6, mu, length)),
    ],
)  # fmt: skip
def test_chosen_correlation_in_the_running_plant(name: str, library) -> None:  # type: ignore[no-untyped-def]
    """The drop over a bed is that of the library ``fluids`` for the correlation that the packing names (1e-3)."""
    packing = Packing("glass", False, 0.1, 0.38, correlation=name)
    plant = RigPlant(column_rig(tracer(), packing), 1)
    plant.tell("PU", Action.FILL, 10.0)
    plant.advance(100 * S_NS)
    plant.tell("PU", Action.DELIVER, 2.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    truth, water = plant.truth(), SOLVENTS["water"]
    u = 2e-6 / 60 / area(6.6e-3)
    expected = library(1e-4, 0.38, u, water.density(298.15), water.viscosity(298.15), 0.1)
    assert (truth["pressure:COL.in"] - truth["pressure:COL.out"]) * 1e5 == pytest.approx(expected, rel=1e-3)


def test_liquid_that_is_blocked_in_and_heated() -> None:
    """dP = beta V dT / C (definitions of expansion and compliance), safety case H4; open, the volume leaves instead."""
    rises, volumes = [], []
    for shut in (True, False):
        rig = two_pump_rig()
        plant = RigPlant(replace(rig, regulators=(replace(rig.regulators[0], set_bar=0.001),)), 1, EFFECTS)
        plant.advance(5 * S_NS)
        if shut:
            plant.tell("V-C", Action.MOVE, 2.0)
            plant.advance(plant.now_ns + 3 * S_NS)
        p0, v0 = plant.truth()["pressure:COL"], plant.truth()["volume:waste"]
        t0 = plant.contents.line_K[plant.layout.edge_index["COL"]]
        plant.tell("CH", Action.SET_TEMPERATURE, 40.0)
        plant.tell("CH", Action.CIRCULATE, 1.0)
        plant.advance(plant.now_ns + 1200 * S_NS)
        warm = plant.contents.line_K[plant.layout.edge_index["COL"]] - t0
        volume = column_liquid(rig.columns[0]) * SOLVENTS["ethanol"].expansion(295.15) * warm
        inside = [n for n in plant.layout.nodes if n.hydraulic and not n.ground and not n.id.endswith(".in")]
        total = sum(n.compliance for n in inside) + sum(
            plant.layout.nodes[plant.layout.node_index[f"{c}.in"]].compliance for c in ("COL", "BPR")
        )
        rises.append((plant.truth()["pressure:COL"] - p0) * 1e5 / (volume / total))
        volumes.append((plant.truth()["volume:waste"] - v0) * 1e-6 / volume)
        assert warm > 14.0
    assert rises[0] == pytest.approx(1.0, rel=0.02)
    assert volumes[1] == pytest.approx(1.0, rel=0.02)
    assert volumes[0] == pytest.approx(0.0, abs=1e-3)
    assert rises[1] == pytest.approx(0.0, abs=0.03)


def test_high_bottle_siphons_by_its_height() -> None:
    """rho g h drives liquid through an open tube by Hagen-Poiseuille; a low flask pulls, and nothing runs uphill."""
    vessels = (
        Vessel("high", VesselRole.SUPPLY, 1000, 500, "solvent", height_mm=400.0),
        Vessel("low", VesselRole.COLLECT, 900, height_mm=-100.0),
    )
    plant = RigPlant(rig_of(tracer(), WATER, vessels=vessels, lines=(line("L", "high", "low", 0.5, 1000.0),)), 1)
    plant.advance(60 * S_NS)
    drop = SOLVENTS["water"].density(295.15) * 9.80665 * 0.5
    assert plant.truth()["flow:L"] == pytest.approx(drop / resistance(MU, 1.0, 0.5e-3) * 60e6, rel=1e-6)


def test_high_flask_flows_back_through_a_leaking_check_valve() -> None:
    """The pump stands; a flask 0.5 m above the bottle empties backward through the leak, by the two resistances."""
    rig = dead_end(0.01)
    vessels = (rig.vessels[0], replace(rig.vessels[1], content_mL=100.0, height_mm=500.0), rig.vessels[2])
    plant = RigPlant(replace(rig, vessels=vessels), 1, EFFECTS)
    plant.inject(FaultSpec("backflow", "PU", magnitude=0.05))
    plant.advance(120 * S_NS)
    head = SOLVENTS["water"].density(295.15) * 9.80665 * 0.5
    tubes = sum(resistance(MU, q.length_mm * 1e-3, q.bore_mm * 1e-3) for q in DEAD_END)
    leak = 1e5 * 60e6 / 0.05
    assert plant.truth()["flow:L-1"] == pytest.approx(-head / (tubes + leak) * 60e6, rel=1e-3)
    assert plant.truth()["volume:bottle"] > 900.0


def test_soft_bed_keeps_part_of_its_compression() -> None:
    """Voidage e0 - kappa s, s = dP + h (dP_max - dP): going down, the bed drops more than it did going up."""
    soft = Packing("soft", True, 0.03, 0.38, 0.0, compressibility_per_bar=0.012, hysteresis=0.5)
    plant = RigPlant(column_rig(tracer(), soft), 1)
    plant.tell("PU", Action.FILL, 50.0)
    plant.advance(400 * S_NS)
    drops, voidage = [], []
    for q in (1.0, 4.0, 1.0):
        plant.tell("PU", Action.DELIVER, q)
        plant.advance(plant.now_ns + 60 * S_NS)
        drops.append(plant.truth()["pressure:COL.in"] - plant.truth()["pressure:COL.out"])
        voidage.append(plant.truth()["voidage:COL"])
    assert drops[2] > 1.02 * drops[0]
    assert voidage[0] == pytest.approx(0.38 - 0.012 * drops[0], abs=2e-4)
    assert voidage[2] == pytest.approx(0.38 - 0.012 * (drops[2] + 0.5 * (drops[1] - drops[2])), abs=5e-4)
    assert packed_bed.pressed_voidage(0.38, 5e-7, 1e5, 3e5, 0.0) == packed_bed.pressed_voidage(0.38, 5e-7, 1e5)


COMPLIANCES = st.sampled_from([0.005, 0.01, 0.2, 20.0])
WALK = st.lists(
    st.tuples(
        st.sampled_from([0.0, 0.02, 2.0, 5.0]), st.sampled_from([0.0, 1.0]),
        st.sampled_from([0.001, 0.01, 0.05, 0.2, 1.0, 20.0, 600.0]),
    ),
    min_size=3, max_size=10,
)  # fmt: skip


@settings(max_examples=30, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(COMPLIANCES, WALK)
def test_no_step_size_blows_up(compliance: float, walk: list[tuple[float, float, float]]) -> None:
    """Stiff (0.005 mL/bar) and soft, any caller's step: pressures stay within what pump, relief and vacuum allow."""
    rig = dead_end(compliance, Relief("RV", "V", 15.0, 13.0, "waste", 40.0))
    plant = blocked(rig, 1.0)
    plant.settle()
    start = plant.contents.totals()[-1]
    for flow, shut, step_s in walk:
        plant.tell("V", Action.MOVE, shut)
        plant.tell("PU", Action.DELIVER if flow else Action.STOP, flow)
        for _ in range(3):
            plant.advance(plant.now_ns + round(step_s * S_NS))
        pressures = plant.flows.pressure / 1e5
        assert np.isfinite(pressures).all()
        assert pressures.max() < 15.0 + 1.0
        assert pressures.min() > -1.0
    plant.settle()
    assert abs(plant.contents.totals()[-1] / start - 1.0) < 1e-9
    assert math.isfinite(plant.truth()["flow:L-1"])
