"""Dispersion in tubes of the running plant: Taylor-Aris where it holds, pure convection where it does not."""

from __future__ import annotations

import numpy as np
import pytest
from fakes.sim_rigs import S_NS, line, pump, rig_of, tracer
from numpy.typing import NDArray

from rigd.model.orders import Action
from rigd.model.rig import Liquid, LiquidRole, RigDefinition, Vessel, VesselRole
from rigd_sim.physics import tubing
from rigd_sim.plant import RigPlant


def tube_rig(bore_mm: float, length_m: float) -> RigDefinition:
    """A pump, one tube, a flask; diffusivity 1e-9 m2/s."""
    return rig_of(
        tracer(),
        (Liquid("solvent", "water", LiquidRole.SOLVENT, "water", {}),),
        vessels=(Vessel("bottle", VesselRole.SUPPLY, 1000, 900, "solvent"), Vessel("flask", VesselRole.COLLECT, 1000)),
        pumps=(pump("PU", 1, stroke_mL=50.0, compliance_mL_bar=1e-4, dead_mL=0.0),),
        lines=(line("L-0", "bottle", "PU", 1.0, 100.0), line("L", "PU", "flask", bore_mm, length_m * 1e3)),
    )


def front(
    bore_mm: float, length_m: float, flow_mL_min: float, until: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Flow-averaged F(theta) at the outlet (what a flask collects), from the slope of the amount collected."""
    plant = RigPlant(tube_rig(bore_mm, length_m), 1)
    contents, layout = plant.contents, plant.layout
    plant.tell("PU", Action.FILL, 50.0)
    plant.advance(400 * S_NS)
    for name in ("PU.syringe1", "PU.out"):
        contents.node_c[layout.node_index[name], 0] = 1000.0
    tau = layout.edges[layout.edge_index["L"]].volume / (flow_mL_min * 1e-6 / 60)
    plant.tell("PU", Action.DELIVER, flow_mL_min)
    start, step = plant.now_ns, 0.02
    amounts = [0.0]
    for k in range(round(until / step)):
        plant.advance(start + round((k + 1) * step * tau * S_NS))
        plant.settle()
        amounts.append(plant.truth()["amount:flask:A"])
    collected = np.diff(amounts) / (flow_mL_min / 60 * step * tau)
    return (np.arange(len(collected)) + 0.5) * step, collected


def moments(thetas: NDArray[np.float64], f: NDArray[np.float64]) -> tuple[float, float]:
    """Mean and variance of theta from F."""
    step = thetas[1] - thetas[0]
    mean = float((1 - f).sum() * step)
    return mean, float(2 * (thetas * (1 - f)).sum() * step - mean**2)


@pytest.mark.parametrize(
    ("bore_mm", "length_m", "flow", "sigma"),
    [(0.5, 5.0, 0.1, 0.0664907), (1.0, 5.0, 0.1, 0.0664918), (1.0, 5.0, 1.0, 0.210261)],
)
def test_taylor_aris_where_it_holds(bore_mm: float, length_m: float, flow: float, sigma: float) -> None:
    """G. I. Taylor 1953, R. Aris 1956: sigma_t/tau = sqrt(2K/(uL)) at D tau/R^2 of 9.4, 9.4 and 0.94, within 5 %.

    The bore does not matter at fixed length and flow (first two rows).
    """
    thetas, f = front(bore_mm, length_m, flow, 2.5)
    mean, variance = moments(thetas, f)
    assert mean == pytest.approx(1.0, abs=0.01)
    assert np.sqrt(variance) == pytest.approx(sigma, rel=0.05)


def test_taylor_aris_in_a_narrow_tube() -> None:
    """Same law, 0.25 mm: rings mix several times within a second, and the step of the plant widens sigma by 11 %."""
    mean, variance = moments(*front(0.25, 5.0, 0.1, 2.5))
    assert mean == pytest.approx(1.0, abs=0.01)
    assert np.sqrt(variance) == pytest.approx(0.0664905, rel=0.12)


def test_pure_convection_where_nothing_has_time_to_diffuse() -> None:
    """D tau/R^2 = 0.003: F = 1 - 1/(4 theta^2); nothing before 0.5 tau; four rings follow it within a ring's share."""
    bore_mm, length_m, flow = 1.0, 0.3, 20.0
    tau = 0.3 * tubing.area(1e-3) / (20.0e-6 / 60)
    assert tubing.development(1e-9, tau, 1e-3) < 0.01
    thetas, f = front(bore_mm, length_m, flow, 5.0)
    assert f[thetas < 0.5].max() < 0.02
    exact = np.array([tubing.pure_convection_step(t) for t in thetas])
    assert np.abs(f - exact)[thetas > 0.5].max() < 0.45
    assert np.abs(f - exact)[thetas > 0.5].mean() < 0.05
    assert f[np.searchsorted(thetas, 3.0)] < 0.99  # the tail that three residence times leave behind


def test_rings_have_taylors_long_time_limit_whatever_their_number() -> None:
    """The factor on radial exchange makes sum of flux^2/exchange equal u^2 R^2/(48 D) exactly (own derivation)."""
    for rings in (2, 3, 4, 8):
        rates = tubing.ring_exchange(1e-9, 0.5e-3, rings)
        passed, total = 0.0, 0.0
        for velocity, rate in zip(tubing.ring_velocities(rings), rates, strict=False):
            passed += velocity - 1.0
            total += passed**2 / rate
        assert total / rings == pytest.approx((0.25e-3) ** 2 / (48 * 1e-9), rel=1e-12)
        assert sum(tubing.ring_velocities(rings)) / rings == pytest.approx(1.0)
