"""Reactions in the running plant against closed forms and an independent integrator."""

from __future__ import annotations

import math

import numpy as np
import pytest
from fakes.sim_rigs import OUTLET_S, S_NS, charged, column_rig, outlet
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd_sim.physics import kinetics
from rigd_sim.plant import RigPlant

NEARLY_PLUG = Packing("fine beads", True, 0.02, 0.4)  # Pe about 2500
CATALYST, LIQUID = ReactionPlace.CATALYST, ReactionPlace.LIQUID


def chemistry(*reactions: Reaction) -> Chemistry:
    """Five species, room temperature."""
    return Chemistry("test", tuple(Species(s, s, 100.0) for s in "ABCDS"), reactions, "A", "C")


def reaction(name: str, nu: dict[str, float], k: float, place: ReactionPlace = CATALYST, **options: object) -> Reaction:
    """Mass action in what is used up, reference 25 degC, no activation energy."""
    orders = {s: -n for s, n in nu.items() if n < 0}
    values = {"law": RateLaw.POWER, "orders": orders, **options}
    return Reaction(name, nu, place=place, rate_constant=k, reference_degC=25.0, activation_energy_kJ_mol=0.0, **values)  # type: ignore[arg-type]


def steady(
    chem: Chemistry, feed: dict[str, float], flow: float, packing: Packing = NEARLY_PLUG
) -> tuple[RigPlant, float]:
    """A column fed with ``feed`` [mol/L] long enough to be steady; tau of the liquid between the beads [s]."""
    plant = RigPlant(column_rig(chem, packing), 1)
    for species, mol_L in feed.items():
        charged(plant, species, mol_L * 1e3) if species == next(iter(feed)) else _add(plant, species, mol_L * 1e3)
    tau = plant.layout.edges[plant.layout.edge_index["COL"]].volume / (flow * 1e-6 / 60)
    plant.tell("PU", Action.DELIVER, flow)
    plant.advance(plant.now_ns + round(4 * tau * S_NS))
    return plant, tau


def _add(plant: RigPlant, species: str, mol_m3: float) -> None:
    contents, layout = plant.contents, plant.layout
    column = contents.species.index(species)
    for name in ("PU.syringe1", "PU.out", "COL.in"):
        contents.node_c[layout.node_index[name], column] = mol_m3


@pytest.mark.parametrize(
    ("k", "a", "b", "x"), [(0.01, 0.5, 0.5, 0.6), (0.01, 0.5, 0.75, 0.7701677802), (0.01, 0.5, 0.4, 0.5090162096)]
)
def test_second_order_in_the_bed(k: float, a: float, b: float, x: float) -> None:
    """O. Levenspiel, Chemical Reaction Engineering, 3rd ed., ch. 3, at tau = 300 s: within 0.5 % of what is left."""
    volume = math.pi * 3.3e-3**2 * 0.1 * 0.4
    flow = volume / 300.0 * 60e6
    plant, tau = steady(chemistry(reaction("r", {"A": -1, "B": -1, "C": 1}, k)), {"A": a, "B": b}, flow)
    assert tau == pytest.approx(300.0)
    assert outlet(plant, "A") / 1e3 == pytest.approx(a * (1 - x), rel=5e-3)
    assert outlet(plant, "C") / 1e3 == pytest.approx(a * x, rel=5e-3)


def test_reversible_second_order_in_the_bed() -> None:
    """Closed form of A + B = C + D with K = 4; a long bed ends at equilibrium, 2/3 for equal feeds (Berthelot 1862)."""
    reversible = reaction(
        "r", {"A": -1, "B": -1, "C": 1, "D": 1}, 1e-4, law=RateLaw.REVERSIBLE, reverse_orders={"C": 1, "D": 1},
        equilibrium_constant=4.0,
    )  # fmt: skip
    plant, tau = steady(chemistry(reversible), {"A": 2.0, "B": 8.0}, 0.2)
    expected = kinetics.reversible_second_order(1e-4, 4.0, 2.0, 8.0, tau)
    assert outlet(plant, "C") / 2e3 == pytest.approx(expected, rel=5e-3)
    fast = Reaction(**{**{f: getattr(reversible, f) for f in reversible.__dataclass_fields__}, "rate_constant": 0.05})
    plant, _ = steady(chemistry(fast), {"A": 2.0, "B": 2.0}, 0.2)
    assert outlet(plant, "C") / 2e3 == pytest.approx(2 / 3, abs=1e-3)


def test_langmuir_hinshelwood() -> None:
    """Integrand k KA KB cA cB/(1+KA cA+KB cB)^2, k 0.02, KA 1.5, KB 0.8, 1.0 and 1.2 mol/L, 300 s: X = 0.5749723908."""
    lhhw = reaction(
        "r", {"A": -1, "B": -1, "C": 1}, 0.02 * 1.5 * 0.8, law=RateLaw.LHHW, adsorption_L_mol={"A": 1.5, "B": 0.8}
    )
    volume = math.pi * 3.3e-3**2 * 0.1 * 0.4
    plant, _ = steady(chemistry(lhhw), {"A": 1.0, "B": 1.2}, volume / 300.0 * 60e6)
    assert outlet(plant, "C") / 1e3 == pytest.approx(0.5749723908, rel=5e-3)


@pytest.mark.parametrize("tau", [150.0, 300.0, 600.0])
def test_series_parallel_time_course(tau: float) -> None:
    """k1 0.01, k2 0.002 L/(mol s), a 0.5, b 0.6 mol/L: closed form and integrator agree to 1e-12 on these numbers."""
    expected = {
        150.0: (0.25605919, 0.33875070, 0.22663233, 0.01730848),
        300.0: (0.16873932, 0.22950966, 0.29203102, 0.03922966),
        600.0: (0.10072421, 0.12918467, 0.32773625, 0.07153954),
    }[tau]
    pair = (reaction("1", {"A": -1, "B": -1, "C": 1}, 0.01), reaction("2", {"C": -1, "B": -1, "S": 1}, 0.002))
    volume = math.pi * 3.3e-3**2 * 0.1 * 0.4
    plant, _ = steady(chemistry(*pair), {"A": 0.5, "B": 0.6}, volume / tau * 60e6)
    for species, value in zip("ABCS", expected, strict=True):
        assert outlet(plant, species) / 1e3 == pytest.approx(value, rel=6e-3)


def test_shorter_contact_gives_less_byproduct() -> None:
    """A + B -> C on the catalyst, C + B -> S everywhere: faster flow converts less and makes relatively less S."""
    pair = (reaction("1", {"A": -1, "B": -1, "C": 1}, 0.02), reaction("2", {"C": -1, "B": -1, "S": 1}, 2e-3, LIQUID))
    conversions, shares = [], []
    for flow in (0.2, 0.5, 1.0, 2.0):
        plant, _ = steady(chemistry(*pair), {"A": 0.5, "B": 0.6}, flow)
        left, product, side = (outlet(plant, s) for s in "ACS")
        conversions.append(1 - left / 500.0)
        shares.append(side / (product + side))
    assert conversions == sorted(conversions, reverse=True)
    assert shares == sorted(shares, reverse=True)


def test_activity_follows_first_order_decay() -> None:
    """a = exp(-kd t) (O. Levenspiel, ch. 21): after one hour at kd 0.5 /h the rate constant is 0.6065 of its start."""
    ageing = reaction("r", {"A": -1, "C": 1}, 0.01, deactivation_per_h=0.5)
    plant, _ = steady(chemistry(ageing), {"A": 1.0}, 0.5)
    first = -math.log(outlet(plant, "A") / 1e3)
    plant.advance(plant.now_ns + 3600 * S_NS)
    assert -math.log(outlet(plant, "A") / 1e3) / first == pytest.approx(math.exp(-0.5), rel=1e-2)


def test_rate_per_gram_is_mass_over_liquid() -> None:
    """A rate constant per gram counts the catalyst per litre of liquid between the beads."""
    volume = math.pi * 3.3e-3**2 * 0.1 * 0.4
    loaded = Packing("loaded", True, 0.1, 0.4, mass_g=1.5)
    grams_per_L = 1.5 / (volume * 1e3)
    per_gram, _ = steady(chemistry(reaction("r", {"A": -1, "C": 1}, 1e-5, per_gram=True)), {"A": 1.0}, 0.5, loaded)
    plain, _ = steady(chemistry(reaction("r", {"A": -1, "C": 1}, 1e-5 * grams_per_L)), {"A": 1.0}, 0.5, loaded)
    assert outlet(per_gram, "A") == pytest.approx(outlet(plain, "A"), rel=1e-9)


def _lines(plant: RigPlant, feed: NDArray[np.float64], k1: float, k2: float, flow: float, until: float) -> float:
    """Outlet of C after a step feed, by an independent method of lines: 400 cells, central differences, scipy BDF."""
    bed = plant.contents.beds["COL"]
    n = 400
    volume = plant.layout.edges[bed.edge].volume
    q = flow * 1e-6 / 60
    pe = q / plant.contents.exchange[bed.kernel] * bed.cells
    dx = 1.0 / n

    def slope(_t: float, y: NDArray[np.float64]) -> NDArray[np.float64]:
        c = y.reshape(n, 4)
        flux = np.empty((n + 1, 4))
        flux[0] = feed
        flux[1:n] = 0.5 * (c[:-1] + c[1:]) - (c[1:] - c[:-1]) / (pe * dx)
        flux[n] = c[-1]
        r1, r2 = k1 * c[:, 0] * c[:, 1], k2 * c[:, 2] * c[:, 1]
        source = np.stack([-r1, -r1 - r2, r1 - r2, r2], axis=1)
        out: NDArray[np.float64] = (q / volume * (flux[:-1] - flux[1:]) / dx + source).ravel()
        return out

    band = 8
    sparsity = np.zeros((4 * n, 4 * n))
    for i in range(4 * n):
        sparsity[i, max(0, i - band) : i + band] = 1.0
    solution = solve_ivp(slope, (0.0, until), np.zeros(4 * n), "BDF", rtol=1e-6, atol=1e-8, jac_sparsity=sparsity)
    return float(solution.y.reshape(n, 4, -1)[-1, 2, -1])


@pytest.mark.parametrize(("theta", "bead_mm", "k2"), [(1.0, 0.5, 2e-3), (1.3, 0.5, 2e-3), (3.0, 2.0, 1e-2)])
def test_transient_against_an_independent_integrator(theta: float, bead_mm: float, k2: float) -> None:
    """Two reactions and dispersion during breakthrough and when steady: scipy BDF on equations written here again."""
    pair = (reaction("1", {"A": -1, "B": -1, "C": 1}, 0.02), reaction("2", {"C": -1, "B": -1, "S": 1}, k2))
    plant = RigPlant(column_rig(chemistry(*pair), Packing("x", True, bead_mm, 0.4)), 1)
    charged(plant, "A", 500.0)
    _add(plant, "B", 600.0)
    tau = plant.layout.edges[plant.layout.edge_index["COL"]].volume / (1e-6 / 60)
    plant.tell("PU", Action.DELIVER, 1.0)
    plant.advance(plant.now_ns + round((theta * tau - OUTLET_S / 2) * S_NS))
    expected = _lines(plant, np.array([0.5, 0.6, 0.0, 0.0]), 0.02, k2, 1.0, theta * tau)
    assert outlet(plant, "C") / 1e3 == pytest.approx(expected, rel=5e-3, abs=2e-4)
