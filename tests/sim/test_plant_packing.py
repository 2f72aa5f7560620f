"""What a packing does besides its plain rate: pores, films, retention, ageing, leaching; in the running plant."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from fakes.sim_rigs import OUTLET_S, S_NS, charged, column_rig, outlet
from numpy.typing import NDArray
from scipy.integrate import solve_bvp

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd_sim.physics.residence import danckwerts
from rigd_sim.plant import RigPlant

VOIDAGE = 0.4
VOLUME_M3 = math.pi * 3.3e-3**2 * 0.1 * VOIDAGE
D = 1e-9
SMALL_BEADS = Packing("small", True, 0.1, VOIDAGE)


def plant_of(packing: Packing, *reactions: Reaction) -> RigPlant:
    """One column; A at 1 mol/L stands before its inlet."""
    chemistry = Chemistry("test", tuple(Species(s, s, 100.0) for s in "ACZ"), reactions, "A", "C")
    plant = RigPlant(column_rig(chemistry, packing), 1)
    charged(plant, "A", 1000.0)
    return plant


def first_order(k: float, order: float = 1.0, **options: object) -> Reaction:
    """A -> C on the packing at 25 degC."""
    return Reaction(
        "AC", {"A": -1, "C": 1}, RateLaw.POWER, ReactionPlace.CATALYST, k, 25.0, 0.0, {"A": order}, **options,  # type: ignore[arg-type]
    )  # fmt: skip


def run(plant: RigPlant, flow_mL_min: float, seconds: float) -> None:
    """Deliver for a while."""
    plant.tell("PU", Action.DELIVER, flow_mL_min)
    plant.advance(plant.now_ns + round(seconds * S_NS))


def tau_s(flow_mL_min: float) -> float:
    """Space time of the liquid between the beads."""
    return VOLUME_M3 / (flow_mL_min * 1e-6 / 60.0)


def peclet(plant: RigPlant, flow_mL_min: float) -> float:
    """Pe of the column as the plant has it."""
    bed = plant.contents.beds["COL"]
    return float(flow_mL_min * 1e-6 / 60 / plant.contents.exchange[bed.kernel] * bed.cells)


@pytest.mark.parametrize(
    ("phi", "eta"), [(0.5, 0.9837204824), (1.0, 0.9391058565), (3.0, 0.6716364900), (10.0, 0.2700000012)]
)
def test_effectiveness_factor_of_a_sphere(phi: float, eta: float) -> None:
    """E. W. Thiele, Ind. Eng. Chem. 31 (1939) 916, sphere, first order: the bed works at eta k."""
    k, flow = 0.01, 0.8
    share = (0.05e-3 / phi) ** 2 * k * VOIDAGE / (1 - VOIDAGE) / D
    plant = plant_of(replace(SMALL_BEADS, pore_diffusion=share), first_order(k, diffusion_limits=True))
    run(plant, flow, 4 * tau_s(flow))
    left = outlet(plant, "A") / 1e3
    assert left == pytest.approx(danckwerts(peclet(plant, flow), eta * k * tau_s(flow)), rel=5e-3)


def test_film_and_pores_in_series() -> None:
    """1/k_observed = 1/(kc a) + 1/(eta k), kc by E. J. Wilson, C. J. Geankoplis, Ind. Eng. Chem. Fundam. 5 (1966) 9."""
    k, flow, bead = 0.5, 4.0, 1e-3
    plant = plant_of(Packing("large", True, 1.0, VOIDAGE, pore_diffusion=1.0), first_order(k, diffusion_limits=True))
    velocity = flow * 1e-6 / 60 / (math.pi * 3.3e-3**2)
    mu, rho = plant.contents._mu, plant.contents._rho
    re, sc = rho * velocity * bead / mu, mu / rho / D
    film = 1.09 / VOIDAGE * re ** (1 / 3) * sc ** (1 / 3) * D / bead * 6 / bead * (1 - VOIDAGE) / VOIDAGE
    phi = bead / 2 * math.sqrt(k * VOIDAGE / (1 - VOIDAGE) / D)
    eta = 3 / phi**2 * (phi / math.tanh(phi) - 1)
    seen = 1 / (1 / film + 1 / (eta * k))
    assert seen < 0.75 * eta * k
    run(plant, flow, 4 * tau_s(flow))
    left = outlet(plant, "A") / 1e3
    assert left == pytest.approx(danckwerts(peclet(plant, flow), seen * tau_s(flow)), rel=5e-3)


def _sphere(order: float, phi: float) -> float:
    """Effectiveness factor by collocation: c'' + 2 c'/x = phi^2 c^n, c'(0) = 0, c(1) = 1 (scipy)."""

    def slope(x: NDArray[np.float64], y: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.vstack([y[1], phi**2 * np.maximum(y[0], 0.0) ** order - 2 * y[1] / np.maximum(x, 1e-9)])

    def ends(a: NDArray[np.float64], b: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.array([a[1], b[0] - 1.0])

    x = np.linspace(1e-6, 1.0, 200)
    found = solve_bvp(slope, ends, x, np.vstack([np.ones_like(x), np.zeros_like(x)]), tol=1e-6, max_nodes=50000)
    assert found.success
    return float(3.0 * found.y[1, -1] / phi**2)


@pytest.mark.parametrize(("order", "phi"), [(2.0, 1.0), (2.0, 5.0), (0.5, 1.0), (0.5, 2.0)])
def test_other_orders_by_the_generalised_modulus(order: float, phi: float) -> None:
    """Against the boundary-value problem itself: within 5 % (it joins the limits of slow and fast)."""
    k, flow = 6e-4, 0.8
    k_si = k * 1000.0 ** (1 - order)
    share = (0.05e-3 / phi) ** 2 * k_si * 1000.0 ** (order - 1) * VOIDAGE / (1 - VOIDAGE) / D
    plant = plant_of(replace(SMALL_BEADS, pore_diffusion=share), first_order(k, order, diffusion_limits=True))
    run(plant, flow, 4 * tau_s(flow))
    made = outlet(plant, "C") / 1e3
    mean = 1.0 - made / 2.0
    assert made == pytest.approx(_sphere(order, phi) * k * mean**order * tau_s(flow), rel=0.05)


def test_a_retained_species_comes_later_and_nothing_is_lost() -> None:
    """Retention volume e V (1 + (1-e)/e K) of a linear isotherm (balance); amounts to 1e-9."""
    constant, flow = 1.5, 1.0
    plant = plant_of(replace(SMALL_BEADS, retention={"A": constant}))
    column = plant.contents.species.index("A")
    before = plant.contents.totals()
    expected = VOLUME_M3 * (1 + (1 - VOIDAGE) / VOIDAGE * constant)
    run(plant, flow, 3 * expected / (flow * 1e-6 / 60))
    assert outlet(plant, "A") == pytest.approx(1000.0, rel=1e-3)
    truth = plant.truth()
    passed_mL = flow * (plant.now_ns / S_NS - (50.0 / 8.0 * 60.0 + 5.0)) / 60.0
    held_mL = passed_mL - truth["amount:flask:A"]
    assert held_mL == pytest.approx(expected * 1e6, rel=0.03)
    assert plant.contents.totals()[column] == pytest.approx(before[column], rel=1e-9)


def test_retention_does_not_change_the_steady_state() -> None:
    """Once saturated, a packing that retains A converts as one that does not."""
    seen = []
    for retention in ({}, {"A": 1.0}):
        plant = plant_of(replace(SMALL_BEADS, retention=retention), first_order(0.01))
        run(plant, 1.0, 8 * tau_s(1.0))
        seen.append(outlet(plant, "A"))
    assert seen[0] == pytest.approx(seen[1], rel=2e-3)


def test_deactivation_follows_arrhenius() -> None:
    """kd 5.8409 /h at 60 degC with 58 kJ/mol is 0.5 /h at 25 degC (factor 11.6818): exp(-0.5) in 1 h."""
    ageing = Reaction(
        "AC", {"A": -1, "C": 1}, RateLaw.POWER, ReactionPlace.CATALYST, 0.01, 60.0, 0.0, {"A": 1.0},
        deactivation_per_h=0.5 * 11.6818, deactivation_energy_kJ_mol=58.0,
    )  # fmt: skip
    plant = plant_of(SMALL_BEADS, ageing)
    run(plant, 0.5, 4 * tau_s(0.5))
    first = -math.log(outlet(plant, "A") / 1e3)
    plant.advance(plant.now_ns + round((3600 - OUTLET_S) * S_NS))
    assert -math.log(outlet(plant, "A") / 1e3) / first == pytest.approx(math.exp(-0.5), rel=1e-2)


def test_deactivation_by_turnover() -> None:
    """Differential bed: da/dN = -a/Ne and dN/dt = a r0, so a = 1/(1 + r0 t/Ne) (O. Levenspiel, ch. 21: parallel)."""
    k, flow, turnovers = 2e-4, 2.0, 1.0
    sites = 1.0 * 2.0e-3
    packing = replace(SMALL_BEADS, mass_g=1.0, active_sites_mmol_g=2.0)
    plant = plant_of(packing, first_order(k, deactivation_turnovers=turnovers))
    run(plant, flow, 4 * tau_s(flow))
    r0 = k * 1000.0 * VOLUME_M3 / sites
    run(plant, flow, 1200.0)
    bed = plant.contents.beds["COL"]
    mean = float(plant.contents.activity[bed.start : bed.start + bed.cells, 0].mean())
    expected = 1.0 / (1.0 + r0 * (1200.0 + 3.5 * tau_s(flow)) / turnovers)
    assert expected < 0.9
    assert mean == pytest.approx(expected, rel=1e-2)


def test_leaching_goes_into_the_liquid_and_acts_there() -> None:
    """a = exp(-l V/V_bed); the sites lost are in the liquid, to rounding, and catalyse in the flask."""
    share, flow = 0.004, 2.0
    packing = replace(SMALL_BEADS, mass_g=1.0, active_sites_mmol_g=2.0)
    on_bed = first_order(1e-3, leaching_per_volume=share, leached_species="Z")
    in_liquid = Reaction(
        "hom", {"A": -1, "C": 1}, RateLaw.POWER, ReactionPlace.LIQUID, 0.05, 25.0, 0.0, {"A": 1, "Z": 1}
    )
    plain, acting = plant_of(packing, on_bed), plant_of(packing, on_bed, in_liquid)
    for plant in (plain, acting):
        start = plant.now_ns
        run(plant, flow, 900.0)
        plant.settle()
        bed = plant.contents.beds["COL"]
        volumes = flow / 60 * (plant.now_ns - start) / S_NS * 1e-6 / VOLUME_M3
        activity = plant.contents.activity[bed.start : bed.start + bed.cells, 0]
        assert activity.mean() == pytest.approx(math.exp(-share * volumes), rel=5e-3)
        column = plant.contents.species.index("Z")
        assert plant.contents.totals()[column] == pytest.approx(bed.leached_mol, rel=1e-9)
        assert bed.leached_mol == pytest.approx(2e-3 * (1 - activity.mean()), rel=1e-6)
    assert acting.truth()["amount:flask:C"] > 1.02 * plain.truth()["amount:flask:C"]
