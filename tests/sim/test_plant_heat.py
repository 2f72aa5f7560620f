"""Bath, jacket and bed against closed forms and balances."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, charged, column_rig, tracer, two_pump_rig
from scipy.integrate import solve_ivp

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import Column, Packing
from rigd_sim.physics import heat
from rigd_sim.physics.properties import SOLVENTS
from rigd_sim.plant import RigPlant, bath_unit, thermal

HARD = Packing("hard", True, 0.2, 0.4)


def hot(minutes: float, setpoint: float = 60.0, flow: float = 0.0) -> RigPlant:
    """The demonstration rig after some minutes of heating."""
    plant = RigPlant(two_pump_rig(), 1)
    plant.tell("PU-A", Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    plant.tell("CH", Action.SET_TEMPERATURE, setpoint)
    plant.tell("CH", Action.CIRCULATE, 1.0)
    if flow:
        plant.tell("PU-A", Action.DELIVER, flow)
    plant.advance(plant.now_ns + round(minutes * 60 * S_NS))
    return plant


def test_bath_heats_with_its_power() -> None:
    """dT/dt = P/C at full power: 1000 W into 3 L of water are 4.8 K/min, less what the jacket takes (arithmetic)."""
    early, later = hot(2.0).truth(), hot(4.0).truth()
    rate = (later["temperature:CH"] - early["temperature:CH"]) / 2.0
    full = 1000.0 / (3000e-6 * 4.17e6 + 50e-6 * 4.17e6) * 60
    assert rate == pytest.approx(full, rel=0.05)


def test_bath_settles_at_its_setpoint_without_offset() -> None:
    """After 40 min bath within 0.1 K, jacket within 1 K; stability of common baths (common practice, no source)."""
    truth = hot(40.0).truth()
    assert truth["temperature:CH"] == pytest.approx(60.0, abs=0.1)
    assert truth["temperature:COL.jacket"] == pytest.approx(60.0, abs=1.0)


def test_cooling_is_slower_than_heating_and_arrives() -> None:
    """400 W against 1000 W."""
    plant = hot(30.0)
    plant.tell("CH", Action.SET_TEMPERATURE, 20.0)
    start = plant.truth()["temperature:CH"]
    plant.advance(plant.now_ns + 10 * 60 * S_NS)
    assert 12 < start - plant.truth()["temperature:CH"] < 20
    plant.advance(plant.now_ns + 40 * 60 * S_NS)
    assert plant.truth()["temperature:CH"] == pytest.approx(20.0, abs=0.2)


def test_power_off_cools_to_the_room() -> None:
    """Off is off: the bath relaxes to 22 degC with C/G; G is its own loss and, behind standing hoses, the jacket's."""
    plant = hot(30.0)
    plant.tell("CH", Action.CIRCULATE, 0.0)
    plant.advance(plant.now_ns + 120 * S_NS)
    before = plant.truth()["temperature:CH"] - 22.0
    plant.advance(plant.now_ns + 3600 * S_NS)
    after = plant.truth()["temperature:CH"] - 22.0
    behind = bath_unit.JACKET_LOSS_W_K + 2 * thermal.END_LOSS_W_K
    loss = bath_unit.BATH_LOSS_W_K + bath_unit.STAGNANT_W_K * behind / (bath_unit.STAGNANT_W_K + behind)
    assert after / before == pytest.approx(math.exp(-3600 * loss / (3000e-6 * 4.17e6)), rel=0.01)


def test_liquid_approaches_the_jacket_as_a_jacketed_plug(monkeypatch: pytest.MonkeyPatch) -> None:
    """T(L) = Tj + (T0 - Tj) exp(-NTU), NTU = UA/(m cp): steady profile of the bed at 4 mL/min.

    Axial conduction is part of the plant and not of the closed form: 2 % of the driving difference is allowed. The
    unjacketed ends, which cool the outlet by 1 K here, are switched off.
    """
    monkeypatch.setattr(thermal, "END_LOSS_W_K", 0.0)
    plant = hot(20.0)
    plant.tell("PU-A", Action.DELIVER, 4.0)
    for _ in range(10):
        plant.tell("PU-A", Action.FILL, 5.0)
        plant.advance(plant.now_ns + 50 * S_NS)
    bed = plant.contents.beds["COL"]
    fluid = SOLVENTS["ethanol"]
    stream = fluid.density(295.15) * fluid.heat_capacity_J_kg_K * 4e-6 / 60
    jacket = plant.thermal.jacket("COL")
    profile = plant.contents.temperature[bed.start : bed.start + bed.cells]
    for share in (0.25, 0.5, 1.0):
        expected = heat.jacketed_outlet(295.15, jacket, 0.5 / stream * share)
        assert profile[round(share * bed.cells) - 1] == pytest.approx(expected, abs=0.02 * (jacket - 295.15))


def test_adiabatic_rise() -> None:
    """dT = (-dH) c X/(rho cp): 1 mol/L, -20 kJ/mol in water, no jacket, no losses, after the front is through."""
    nu = {"A": -1, "P": 1}
    fast = Reaction("r", nu, RateLaw.POWER, ReactionPlace.CATALYST, 2.0, 25.0, 0.0, {"A": 1}, heat_kJ_mol=-20.0)
    chemistry = Chemistry("hot", (Species("A", "A", 1.0), Species("P", "P", 1.0)), (fast,), "A", "P")
    rig = column_rig(chemistry, HARD)
    column = replace(rig.columns[0], wall_conductance_W_K=0.0)
    plant = RigPlant(replace(rig, columns=(column,)), 1)
    charged(plant, "A", 1000.0)
    plant.tell("PU", Action.DELIVER, 5.0)
    plant.advance(plant.now_ns + 500 * S_NS)
    water = SOLVENTS["water"]
    rise = heat.adiabatic_rise(-20e3, 1000.0, water.density(298.15), water.heat_capacity_J_kg_K)
    assert rise == pytest.approx(4.798, rel=1e-3)
    assert plant.truth()["temperature:COL.max"] - 25.0 == pytest.approx(rise, rel=0.02)


def test_cooling_loss_with_reagent_inside_shows_its_rise() -> None:
    """Bed alone, no jacket flow: 5 W into it raise it by more than 1 K/min, toward what its wall lets go."""
    plant = hot(30.0)
    before = plant.truth()["temperature:COL"]
    plant.levers.exotherm_W["COL"] = 5.0
    plant.levers.bath("CH").pump_dead = True
    plant.advance(plant.now_ns + 120 * S_NS)
    assert plant.truth()["temperature:COL"] - before > 4.0


def test_column_without_jacket_stays_at_room_temperature() -> None:
    """No chiller: the wall sees the room."""
    plant = RigPlant(column_rig(tracer(), HARD), 1)
    plant.advance(3600 * S_NS)
    assert plant.truth()["temperature:COL"] == pytest.approx(25.0, abs=1e-9)


def test_mesh_and_step_do_not_matter_for_the_profile(monkeypatch: pytest.MonkeyPatch) -> None:
    """Twice the places: the middle of the bed moves by less than 0.3 K of 38 K."""
    from rigd_sim.plant import layout

    middles = []
    for cells in (100, 200):
        monkeypatch.setattr(layout, "CELLS_BED", cells)
        plant = hot(15.0, flow=0.3)
        middles.append(plant.truth()["temperature:COL"])
    assert np.ptp(middles) < 0.3
    assert isinstance(plant.rig.columns[0], Column)


@pytest.mark.parametrize("flow", [0.2, 0.5, 2.0])
def test_hot_outlet_cools_along_the_line(flow: float) -> None:
    """T(L) = T_room + (T_0 - T_room) exp(-NTU), NTU = UA/(rho cp Q): 250 mm of 0.5 mm tube after the warm column.

    Plug with a constant coefficient to the room (any textbook of heat transfer); UA summed here from its three films.
    """
    plant = hot(30.0)
    for _ in range(2):  # the other syringe is full by now
        plant.tell("PU-A", Action.SWAP, 0.0)
        plant.tell("PU-A", Action.FILL, 5.0)
        plant.advance(plant.now_ns + 60 * S_NS)
    plant.tell("PU-A", Action.DELIVER, flow)
    plant.advance(plant.now_ns + 120 * S_NS)
    node_K, layout = plant.thermal.node_K - 273.15, plant.layout
    start, end = node_K[layout.node_index["COL.out"]], node_K[layout.node_index["IR"]]
    resistances = (
        1.0 / (3.66 * 0.167 * math.pi),
        math.log(1.5875 / 0.5) / (2 * math.pi * 0.25),
        1.0 / (25.0 * math.pi * 1.5875e-3),
    )
    ethanol = SOLVENTS["ethanol"]
    rho_cp = ethanol.density(295.15) * ethanol.heat_capacity_J_kg_K
    ntu = 0.25 / sum(resistances) / (rho_cp * flow * 1e-6 / 60)
    assert start > 35.0
    assert end - 22.0 == pytest.approx((start - 22.0) * math.exp(-ntu), rel=1e-3, abs=1e-3)


def test_cooling_lost_with_reagent_inside_shows_the_adiabatic_rise() -> None:
    """dT = (-dH) c V_liquid / (sum of heat capacities): the accumulated reagent of a stopped bed (F. Stoessel, Thermal
    Safety of Chemical Processes, 2008, ch. 3: T_p + X_accumulated dT_ad). All liquid is between the beads here."""
    species = (Species("A", "A", 100.0), Species("P", "P", 100.0))
    exothermic = Reaction(
        "AP", {"A": -1, "P": 1}, RateLaw.POWER, ReactionPlace.CATALYST, 0.02, 25.0, 0.0, {"A": 1}, heat_kJ_mol=-80.0
    )
    rig = column_rig(Chemistry("hot", species, (exothermic,), "A", "P"), HARD)
    column = replace(rig.columns[0], wall_conductance_W_K=1e-6)  # the cooling is lost
    plant = RigPlant(replace(rig, columns=(column,)), 1)
    edge = plant.layout.edge_index["COL"]
    plant.contents.cells[plant.contents.slots(edge), 0] = 1500.0
    before = plant.truth()["temperature:COL"]
    plant.advance(400 * S_NS)
    bed = plant.contents.beds["COL"]
    heat_J = 80e3 * 1500.0 * plant.layout.edges[edge].volume
    capacity = plant.thermal.capacity(bed) * bed.cells
    rise = plant.truth()["temperature:COL"] - before
    ends = 2 * thermal.END_LOSS_W_K * 400.0 / capacity  # what the ends take at most
    assert rise > 4.0
    assert heat_J / capacity * (1.0 - ends) < rise < heat_J / capacity * 1.0001
    assert plant.thermal.book.reaction == pytest.approx(heat_J, rel=1e-3)


def test_bath_follows_a_step_like_its_equations() -> None:
    """Bath, jacket, heater lag and thermostat written again as a system of equations, integrated by scipy's LSODA."""
    bath = bath_unit.BathUnit(two_pump_rig().chillers[0], 295.15)
    bath.jackets["COL"] = 295.15
    bath.tell(Action.SET_TEMPERATURE, 60.0)
    bath.tell(Action.CIRCULATE, 1.0)
    c_bath, c_jacket = 3000e-6 * bath_unit.RHO_CP_J_M3_K, bath_unit.JACKET_M3 * bath_unit.RHO_CP_J_M3_K

    def slopes(_t: float, y: np.ndarray) -> list[float]:
        t_bath, t_jacket, power, integral = y
        error = 333.15 - t_bath
        wanted = (error / bath_unit.BAND_K + integral) * 1000.0
        free = -400.0 < wanted < 1000.0
        link = bath_unit.CIRCULATION_W_K * (t_jacket - t_bath)
        loss = bath_unit.BATH_LOSS_W_K * (295.15 - t_bath)
        return [
            (power + link + loss) / c_bath,
            (-link + bath_unit.JACKET_LOSS_W_K * (295.15 - t_jacket)) / c_jacket,
            (min(max(wanted, -400.0), 1000.0) - power) / bath_unit.HEATER_LAG_S,
            error / bath_unit.BAND_K / bath_unit.INTEGRAL_S if free else 0.0,
        ]

    at = np.arange(0.0, 2401.0, 60.0)
    exact = solve_ivp(slopes, (0.0, 2400.0), [295.15, 295.15, 0.0, 0.0], "LSODA", at, rtol=1e-8, max_step=1.0).y
    found = [(bath.bath_K, bath.jackets["COL"])]
    for second in range(1, 2401):
        bath.advance(1.0, {}, bath_unit.BathLever(), 295.15)
        if second % 60 == 0:
            found.append((bath.bath_K, bath.jackets["COL"]))
    assert np.abs(np.array(found)[:, 0] - exact[0]).max() < 0.15
    assert np.abs(np.array(found)[:, 1] - exact[1]).max() < 0.25
    assert exact[0].max() < 335.65  # the set-point is passed by little


def test_standing_liquid_is_as_warm_as_the_room() -> None:
    """The cell is warmer than the room while hot liquid flows, and takes the room's temperature when it stands."""
    plant = hot(9.0, flow=0.5)
    flowing = plant.thermal.node_K.copy()
    layout = plant.layout
    assert flowing[layout.node_index["IR"]] > 295.2
    plant.tell("PU-A", Action.STOP, 0.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    assert plant.thermal.node_K[layout.node_index["IR"]] == pytest.approx(295.15, abs=0.05)
