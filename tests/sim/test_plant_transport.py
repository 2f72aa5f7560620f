"""The time-dependent plant against closed forms: step responses, conversions, tubes, beads; order of convergence."""

from __future__ import annotations

import math

import numpy as np
import pytest
from fakes.sim_rigs import OUTLET_S, S_NS, charged, column_rig, outlet, tracer
from numpy.typing import NDArray

from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd_sim.physics.residence import danckwerts, step_closed
from rigd_sim.plant import RigPlant, layout

FLOW_M3_S = 1e-6 / 60
Curve = tuple[NDArray[np.float64], NDArray[np.float64]]


def packing(bead_mm: float, bead_liquid: float = 0.0) -> Packing:
    """A rigid bed of voidage 0.4; the bead size sets its dispersion (S. F. Chung, C. Y. Wen 1968)."""
    return Packing("test", True, bead_mm, 0.4, bead_liquid)


def started(bead_mm: float, k_per_s: float = 0.0, bead_liquid: float = 0.0) -> tuple[RigPlant, float, int]:
    """A plant with 1 mol/L of A about to enter its column at 1 mL/min; tau of the liquid between the beads; start."""
    plant = RigPlant(column_rig(tracer(k_per_s), packing(bead_mm, bead_liquid)), 1)
    charged(plant, "A", 1000.0)
    tau = plant.layout.edges[plant.layout.edge_index["COL"]].volume / FLOW_M3_S
    plant.tell("PU", Action.DELIVER, 1.0)
    return plant, tau, plant.now_ns


def peclet(plant: RigPlant) -> float:
    """Pe of the column from the dispersion that the plant itself uses: Q n / (D A / dx)."""
    bed = plant.contents.beds["COL"]
    return float(FLOW_M3_S / plant.contents.exchange[bed.kernel] * bed.cells)


def breakthrough(plant: RigPlant, tau: float, start_ns: int, until: float = 3.0, step: float = 0.02) -> Curve:
    """F(theta) of what leaves (flux-averaged), from what the flask collects; mid-points of equal intervals."""
    edges = np.arange(0.0, until, step)
    amounts = []
    for theta in edges:
        plant.advance(start_ns + round(theta * tau * S_NS))
        plant.settle()
        amounts.append(plant.truth()["amount:flask:A"])
    return edges[:-1] + step / 2, np.diff(amounts) / (FLOW_M3_S * 1e6 * step * tau)


@pytest.mark.parametrize("bead_mm", [5.0, 1.0])
def test_step_response_and_order_of_convergence(
    bead_mm: float, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Closed-closed step response of H. Brenner, Chem. Eng. Sci. 17 (1962) 229-243 at Pe 10.9 and 52."""
    errors = []
    for cells in (25, 50, 100):
        monkeypatch.setattr(layout, "CELLS_BED", cells)
        thetas, values = breakthrough(*started(bead_mm))
        plant = started(bead_mm)[0]
        plant.advance(plant.now_ns + S_NS)
        pe = peclet(plant)
        errors.append(max(abs(np.interp(t, thetas, values) - step_closed(pe, t)) for t in (0.75, 1.0, 1.25, 1.5, 2.0)))
    assert errors[-1] < 1e-3
    order = math.log2(errors[0] / errors[-1]) / 2
    with capsys.disabled():
        print(
            f"\n  step response, Pe {pe:.1f}: errors {errors[0]:.1e} {errors[1]:.1e} {errors[2]:.1e}, order {order:.2f}"
        )
    assert order > 0.8  # first order: the step of the bed shrinks with its cells


def test_default_mesh_is_within_half_a_percent_everywhere() -> None:
    """The same curve at the default mesh, every point after theta 0.5."""
    plant, tau, start = started(1.0)
    thetas, values = breakthrough(plant, tau, start)
    expected = np.array([step_closed(peclet(plant), t) if t > 0.5 else 0.0 for t in thetas])
    assert np.abs(values - expected)[thetas > 0.5].max() < 5e-3
    assert values[thetas < 0.3].max() < 1e-4


def test_mean_residence_time_is_volume_over_flow() -> None:
    """The mean of a closed vessel is exactly tau (P. V. Danckwerts 1953)."""
    plant, tau, start = started(5.0)
    _, values = breakthrough(plant, tau, start, until=7.0)
    assert float((1.0 - values).sum() * 0.02) == pytest.approx(1.0, abs=1e-3)


@pytest.mark.parametrize("bead_mm", [5.0, 1.0, 0.2])
@pytest.mark.parametrize("da", [0.5, 1.0, 2.0, 5.0])
def test_first_order_conversion(bead_mm: float, da: float) -> None:
    """P. V. Danckwerts 1953; J. F. Wehner, R. H. Wilhelm 1956: 0.5 % on what is left, from the running plant."""
    tau = started(bead_mm)[1]
    plant, tau, start = started(bead_mm, k_per_s=da / tau)
    plant.advance(start + round(6 * tau * S_NS))
    assert outlet(plant, "A") / 1000.0 == pytest.approx(danckwerts(peclet(plant), da), rel=5e-3)


def test_liquid_in_beads_delays_but_does_not_change_the_steady_state() -> None:
    """Tracer volume = interstitial + bead liquid; a rate per interstitial litre does not feel the beads when steady."""
    plant, tau, start = started(1.0, bead_liquid=0.4)
    holdup = 1.0 + 0.6 * 0.4 / 0.4  # (e + (1-e) f)/e
    _, values = breakthrough(plant, tau, start, until=6.0, step=0.05)
    assert float((1.0 - values).sum() * 0.05) == pytest.approx(holdup, rel=0.01)
    reacting, tau, start = started(1.0, k_per_s=1.0 / tau, bead_liquid=0.4)
    reacting.advance(start + round(10 * tau * S_NS))
    assert outlet(reacting, "A") / 1000.0 == pytest.approx(danckwerts(peclet(reacting), 1.0), rel=5e-3)


def test_plug_flow_front_stays_within_two_cells(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without dispersion a front passes 100 cells and is still no wider than two: advection does not smear."""
    plant, tau, start = started(1.0)
    monkeypatch.setattr(plant.contents, "disperse", lambda flow: plant.contents.exchange.fill(0.0))
    plant.advance(start + round(0.9 * tau * S_NS))
    edge = plant.layout.edge_index["COL"]
    cells = plant.layout.edges[edge].cells
    profile = plant.contents.cells[plant.contents.slots(edge), plant.contents.species.index("A")] / 1000.0
    assert np.count_nonzero((profile > 0.001) & (profile < 0.999)) <= 2
    assert profile.sum() == pytest.approx(0.9 * cells, abs=1.0)


def test_flow_may_stop_and_go_on() -> None:
    """A pause in mid-breakthrough shifts the curve by the pause and little else (molecular diffusion only)."""
    plant, tau, start = started(1.0)
    plant.advance(start + round(0.8 * tau * S_NS))
    pe = peclet(plant)
    plant.tell("PU", Action.STOP, 0.0)
    plant.advance(plant.now_ns + 60 * S_NS)
    plant.tell("PU", Action.DELIVER, 1.0)
    plant.advance(plant.now_ns + round((0.2 * tau - OUTLET_S / 2) * S_NS))
    assert outlet(plant, "A") / 1000.0 == pytest.approx(step_closed(pe, 1.0), abs=5e-3)
