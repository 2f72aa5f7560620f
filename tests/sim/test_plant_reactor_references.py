"""The running plant against reactors that others computed: a kinetics library, a textbook's worked example."""

from __future__ import annotations

import math

import cantera as ct
import numpy as np
import pytest
from fakes.sim_rigs import OUTLET_S, S_NS, charged, column_rig, outlet
from numpy.typing import NDArray

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import Packing
from rigd_sim.plant import RigPlant

FINE = Packing("fine", True, 0.02, 0.4)
KELVIN = 298.15
SPECIES = "ABCS"

_PHASE = """
units: {length: m, quantity: mol, activation-energy: J/mol}
phases:
- name: liquid
  thermo: ideal-gas
  elements: [Ar]
  species: [A, B, C, S]
  kinetics: gas
  state: {T: 298.15, P: 1 bar}
species:
- {name: A, composition: {Ar: 1}, thermo: {model: constant-cp}}
- {name: B, composition: {Ar: 1}, thermo: {model: constant-cp}}
- {name: C, composition: {Ar: 2}, thermo: {model: constant-cp}}
- {name: S, composition: {Ar: 3}, thermo: {model: constant-cp}}
reactions:
- {equation: A + B => C, rate-constant: {A: %g, b: 0, Ea: 0}}
- {equation: C => A + B, rate-constant: {A: %g, b: 0, Ea: 0}}
- {equation: C + B => S, rate-constant: {A: %g, b: 0, Ea: 0}}
"""


def batch(forward: float, backward: float, side: float, start: dict[str, float], seconds: float) -> dict[str, float]:
    """Concentrations [mol/m3] after a time at constant volume and temperature, by cantera's reactor network."""
    phase = ct.Solution(yaml=_PHASE % (forward, backward, side))
    total = sum(start.values())
    phase.TPX = KELVIN, total * ct.gas_constant / 1000.0 * KELVIN, {s: c / total for s, c in start.items()}
    reactor = ct.IdealGasReactor(phase, energy="off", clone=False)
    network = ct.ReactorNet([reactor])
    network.rtol, network.atol = 1e-10, 1e-16
    network.advance(seconds)
    return {name: float(phase.concentrations[phase.species_index(name)]) * 1000.0 for name in SPECIES}


def reaction(name: str, nu: dict[str, float], k: float, **options: object) -> Reaction:
    """On the packing at 25 degC, mass action."""
    values = {"law": RateLaw.POWER, "orders": {s: -n for s, n in nu.items() if n < 0}, **options}
    values |= {"place": ReactionPlace.CATALYST, "reference_degC": 25.0, "activation_energy_kJ_mol": 0.0}
    return Reaction(name, nu, rate_constant=k, **values)  # type: ignore[arg-type]


def fed(plant: RigPlant, feed: dict[str, float], flow: float, residences: float) -> float:
    """Feed a column [mol/m3, mL/min] for some residence times; tau [s]."""
    contents, layout = plant.contents, plant.layout
    charged(plant, "A", feed["A"])
    for species in feed.keys() - {"A"}:
        column = contents.species.index(species)
        for name in ("PU.syringe1", "PU.out", "COL.in"):
            contents.node_c[layout.node_index[name], column] = feed[species]
        contents.cells[contents.slots(layout.edge_index["L-1"]), column] = feed[species]
    tau = layout.edges[layout.edge_index["COL"]].volume / (flow * 1e-6 / 60)
    plant.tell("PU", Action.DELIVER, flow)
    plant.advance(plant.now_ns + round(residences * tau * S_NS))
    return tau


@pytest.mark.parametrize("flow", [0.2, 0.6, 2.0])
def test_reversible_series_parallel_against_a_kinetics_library(flow: float) -> None:
    """A + B = C (K 2 L/mol), C + B -> S in plug flow is a batch of the same age: cantera's constant-volume reactor."""
    forward, equilibrium, side = 0.02, 2.0, 0.004
    reactions = (
        reaction(
            "1", {"A": -1, "B": -1, "C": 1}, forward, law=RateLaw.REVERSIBLE, reverse_orders={"C": 1.0},
            equilibrium_constant=equilibrium,
        ),
        reaction("2", {"C": -1, "B": -1, "S": 1}, side),
    )  # fmt: skip
    chemistry = Chemistry("reference", tuple(Species(s, s, 100.0) for s in SPECIES), reactions, "A", "C")
    plant = RigPlant(column_rig(chemistry, FINE), 1)
    feed = {"A": 500.0, "B": 800.0}
    tau = fed(plant, feed, flow, 4.0)
    expected = batch(forward / 1000.0, forward / equilibrium, side / 1000.0, feed, tau)
    for name in SPECIES:
        assert outlet(plant, name) == pytest.approx(expected[name], rel=6e-3, abs=0.3), name


def test_dispersion_example_of_a_textbook() -> None:
    """H. S. Fogler, Elements of Chemical Reaction Engineering, ch. 14: mean 5.15 min, variance 6.1 min2, k 0.25 /min.

    The book has Pe 7.5 and X = 0.68 by the dispersion model (0.725 in plug flow, 0.563 in a stirred tank). The bed is
    given beads that make its Pe 7.54 by the plant's own correlation, and must show it from feed to outlet.
    """
    flow = math.pi * 10.0**2 * 60.0 * 0.4 / 1000.0 / 5.15

    def plant_with(bead_mm: float) -> RigPlant:
        chemistry = Chemistry(
            "book",
            tuple(Species(s, s, 100.0) for s in "AC"),
            (reaction("r", {"A": -1, "C": 1}, 0.25 / 60.0),),
            "A",
            "C",
        )
        return RigPlant(column_rig(chemistry, Packing("coarse", True, bead_mm, 0.4), bore_mm=20.0, length_mm=60.0), 1)

    def peclet(plant: RigPlant) -> float:
        bed = plant.contents.beds["COL"]
        plant.contents.disperse(_flows(plant, flow))
        return float(flow * 1e-6 / 60 / plant.contents.exchange[bed.kernel] * bed.cells)

    low, high = 0.5, 15.0
    for _ in range(40):
        bead = math.sqrt(low * high)
        low, high = (bead, high) if peclet(plant_with(bead)) > 7.543788 else (low, bead)
    plant = plant_with(bead)
    tau = fed(plant, {"A": 1000.0}, flow, 6.0)
    assert tau == pytest.approx(5.15 * 60.0, rel=1e-6)
    conversion = 1.0 - outlet(plant, "A", OUTLET_S) / 1000.0
    assert conversion == pytest.approx(0.68, abs=2.5e-3)
    assert conversion == pytest.approx(0.679482, abs=1.5e-3)


def _flows(plant: RigPlant, flow_mL_min: float) -> NDArray[np.float64]:
    flows = np.zeros(len(plant.layout.edges))
    flows[plant.layout.edge_index["COL"]] = flow_mL_min * 1e-6 / 60
    return flows
