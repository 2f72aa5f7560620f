"""Gas on its way through the rig: P V = constant wherever it is (R. Boyle 1662; isothermal ideal gas)."""

from __future__ import annotations

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, two_pump_rig
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigd.model.orders import Action
from rigd.ports.plant import FaultSpec
from rigd_sim.faults import EFFECTS
from rigd_sim.physics.constants import ATMOSPHERE_PA
from rigd_sim.plant import RigPlant

BUBBLE_mL = 0.1


def delivering(flow_mL_min: float = 0.5) -> RigPlant:
    """The demonstration rig with both pumps at work on full syringes."""
    plant = RigPlant(two_pump_rig(), 1, EFFECTS)
    for name in plant.pumps:
        plant.tell(name, Action.FILL, 5.0)
    plant.advance(60 * S_NS)
    for name in plant.pumps:
        plant.tell(name, Action.SWAP, 0.0)
        plant.tell(name, Action.DELIVER, flow_mL_min)
    plant.advance(plant.now_ns + 60 * S_NS)
    return plant


def true_gas_mL(plant: RigPlant) -> float:
    """Volume that the gas in tubes and bed has at its pressure."""
    contents, flows = plant.contents, plant.flows
    total = 0.0
    for e in np.flatnonzero(contents.cell_count):
        n, s = int(contents.cell_count[e]), int(contents.cell_start[e])
        held = np.full(n + 1, contents.cell_volume[e])
        held[0], held[-1] = contents.fill[e], contents.cell_volume[e] - contents.fill[e]
        ends = [float(flows.pressure[flows.rank[int(i)]]) + ATMOSPHERE_PA for i in (contents.ea[e], contents.eb[e])]
        pressure = np.interp((np.arange(n + 1) + 0.5) / (n + 1), (0.0, 1.0), ends)
        total += float(held @ (contents.cells[s : s + n + 1, contents.gas] * ATMOSPHERE_PA / pressure)) * 1e6
    return total


def test_a_bubble_is_as_large_as_its_pressure_lets_it_be() -> None:
    """0.1 mL at atmospheric pressure take 0.1 P0/P behind the regulator's 2.2 bar, and push so much liquid out."""
    plant = delivering()
    plant.settle()
    before = plant.truth()
    liquid = plant.contents.totals()[plant.contents.n_species : plant.contents.gas].sum()
    start = plant.now_ns
    plant.inject(FaultSpec("bubble", "COL", magnitude=BUBBLE_mL))
    plant.advance(start + 20 * S_NS)
    plant.settle()
    after = plant.truth()
    expected = BUBBLE_mL * ATMOSPHERE_PA / (ATMOSPHERE_PA + 1e5 * after["pressure:COL"])
    assert true_gas_mL(plant) == pytest.approx(expected, rel=0.05)
    assert plant.contents.totals()[plant.contents.gas] * 1e6 == pytest.approx(BUBBLE_mL, rel=1e-9)
    pumped = (plant.now_ns - start) / S_NS / 60.0
    assert after["volume:waste"] - before["volume:waste"] == pytest.approx(pumped + expected, abs=0.004)
    now = plant.contents.totals()[plant.contents.n_species : plant.contents.gas].sum()
    assert now == pytest.approx(liquid, rel=1e-9)


def test_it_passes_the_cell_small_and_leaves_large() -> None:
    """The cell sees the volume at its pressure: the integral of share times flow is 0.1 P0/P."""
    plant = delivering()
    plant.inject(FaultSpec("bubble", "COL", magnitude=BUBBLE_mL))
    node = plant.layout.node_index["IR"]
    seen, flow = 0.0, plant.layout.edge_index["L-2"]
    for _ in range(400):
        plant.advance(plant.now_ns + S_NS)
        share = plant.contents.node_c[node, plant.contents.gas] * plant.contents.squeeze[node]
        seen += float(share) * plant.truth()["flow:L-2"] / 60.0
    assert plant.layout.edges[flow].id == "L-2"
    absolute = ATMOSPHERE_PA + 1e5 * plant.truth()["pressure:IR"]
    assert seen == pytest.approx(BUBBLE_mL * ATMOSPHERE_PA / absolute, rel=0.1)
    waste = plant.layout.node_index["waste"]
    gone = plant.contents.node_volume[waste] * plant.contents.node_c[waste, plant.contents.gas] * 1e6
    assert gone == pytest.approx(BUBBLE_mL, rel=0.1)


EVENTS = st.lists(
    st.tuples(
        st.sampled_from(["bubble", "flow", "stop", "shut", "open", "draws-air"]),
        st.sampled_from([0.3, 1.0, 15.0, 90.0]),
    ),
    min_size=2, max_size=8,
)  # fmt: skip


@settings(max_examples=8, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(EVENTS)
def test_nothing_is_lost_and_nothing_runs_away(events: list[tuple[str, float]]) -> None:
    """Liquid to 1e-9 whatever happens to the gas; pressures stay finite, no share is negative."""
    plant = delivering()
    first, last = plant.contents.n_species, plant.contents.gas
    liquid = plant.contents.totals()[first:last].sum()
    for kind, seconds in events:
        if kind == "bubble":
            plant.inject(FaultSpec("bubble", "TEE", plant.now_ns / S_NS, 60.0, 0.05))
        elif kind == "draws-air":
            plant.inject(FaultSpec("draws-air", "PU-A", plant.now_ns / S_NS, 60.0, 0.3))
            plant.tell("PU-A", Action.FILL, 5.0)
        elif kind in ("shut", "open"):
            plant.tell("V-C", Action.MOVE, 2.0 if kind == "shut" else 0.0)
        else:
            plant.tell("PU-B", Action.DELIVER if kind == "flow" else Action.STOP, 2.0)
        plant.advance(plant.now_ns + round(seconds * S_NS))
        assert np.isfinite(plant.flows.pressure).all()
        assert plant.flows.pressure.max() < 150e5
    plant.settle()
    assert plant.contents.totals()[first:last].sum() == pytest.approx(liquid, rel=1e-9)
    assert plant.contents.cells.min() > -1e-9
    assert plant.contents.node_c.min() > -1e-9


def test_a_syringe_of_air_draws_the_line_down_to_the_room_and_no_further() -> None:
    """Air at 0 bar that meets a line at 2 bar is pressed: the line falls towards 0 bar, not below, and rises again."""
    plant = delivering()
    plant.inject(FaultSpec("bottle-empty", next(v.id for v in plant.rig.vessels if v.liquid), magnitude=1.0))
    before = plant.contents.totals()
    for pump in plant.pumps:
        plant.tell(pump, Action.FILL, 5.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    for pump in plant.pumps:
        plant.tell(pump, Action.SWAP, 0.0)
    lowest = 10.0
    for _ in range(100):
        plant.advance(plant.now_ns + S_NS // 5)
        lowest = min(lowest, min(value for key, value in plant.truth().items() if key.startswith("pressure:")))
    assert -0.25 < lowest < 0.5
    plant.settle()
    liquid = slice(plant.contents.n_species, plant.contents.gas)
    assert plant.contents.totals()[liquid].sum() == pytest.approx(before[liquid].sum(), rel=1e-9)
