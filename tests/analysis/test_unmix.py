"""Un-mixing: the Beer-Lambert law forwards gives back the concentrations; negative noise gives none."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import nnls

from rigd.analysis.unmix import Unmixer, nonnegative_least_squares, reactant_equivalents, reference_spectrum
from rigd.model.chemistry import Band, Chemistry, RateLaw, Reaction, ReactionPlace, Species

GRID = {"start_per_cm": 860.0, "step_per_cm": 4.0, "points": 236}
PATH_UM = 25.0
ACID = Species("acid", "acid", 60.05, bands=(Band(1715.0, 34.0, 330.0), Band(1290.0, 38.0, 120.0)))
ESTER = Species("ester", "ester", 88.11, bands=(Band(1740.0, 24.0, 380.0), Band(1240.0, 26.0, 400.0)))
ETHANOL = Species("ethanol", "ethanol", 46.07, bands=(Band(1047.0, 22.0, 20.0), Band(880.0, 14.0, 8.0)))
GAS = Species("gas", "unseen", 28.0)


def reaction(stoichiometry: dict[str, float]) -> Reaction:
    orders = {name: 1.0 for name, count in stoichiometry.items() if count < 0}
    return Reaction("r", stoichiometry, RateLaw.POWER, ReactionPlace.CATALYST, 1.0, 60.0, 50.0, orders)


def chemistry(*reactions: Reaction, byproducts: tuple[str, ...] = ()) -> Chemistry:
    return Chemistry("test", (ACID, ESTER, ETHANOL, GAS), reactions, "acid", "ester", byproducts)


def unmixer(names: tuple[str, ...] = ("acid", "ester", "ethanol")) -> Unmixer:
    return Unmixer(chemistry(reaction({"acid": -1, "ethanol": -1, "ester": 1})), names, path_um=PATH_UM, **GRID)


def mixture(**mol_L: float) -> np.ndarray:
    grid = GRID["start_per_cm"] + GRID["step_per_cm"] * np.arange(GRID["points"])
    species = {item.id: item for item in (ACID, ESTER, ETHANOL)}
    return sum(amount * PATH_UM * 1e-4 * reference_spectrum(species[name], grid) for name, amount in mol_L.items())


def test_beer_lambert_peak_absorbance_by_hand():
    """A = eps b c: 330 L/(mol cm) x 25 um x 2 mol/L = 1.65 AU at the centre of a lone band (Beer-Lambert law)."""
    lone = Species("s", "s", 1.0, bands=(Band(1715.0, 34.0, 330.0),))
    assert reference_spectrum(lone, np.array([1715.0]))[0] * 25e-4 * 2.0 == pytest.approx(1.65, rel=1e-12)


def test_lorentzian_is_half_high_at_half_its_width():
    lone = Species("s", "s", 1.0, bands=(Band(1000.0, 20.0, 100.0),))
    assert reference_spectrum(lone, np.array([990.0, 1010.0])).tolist() == [50.0, 50.0]


@settings(max_examples=60, deadline=None)
@given(st.floats(0.01, 2.0), st.floats(0.01, 2.0), st.floats(0.5, 18.0), st.floats(-0.2, 0.2), st.floats(-1e-4, 1e-4))
def test_concentrations_come_back_through_any_straight_baseline(acid, ester, ethanol, offset, slope):
    grid = GRID["start_per_cm"] + GRID["step_per_cm"] * np.arange(GRID["points"])
    result = unmixer().solve(mixture(acid=acid, ester=ester, ethanol=ethanol) + offset + slope * grid)
    assert result.concentrations == pytest.approx({"acid": acid, "ester": ester, "ethanol": ethanol}, rel=1e-8)
    assert result.conversion == pytest.approx(ester / (acid + ester), rel=1e-8)
    assert result.residual_AU < 1e-9


def test_noise_of_one_milliabsorbance_costs_what_the_covariance_says():
    """2000 seeds: the scatter of the acid concentration agrees with sigma * sqrt of the covariance's diagonal."""
    solver, chance = unmixer(), np.random.default_rng(3)
    clean = mixture(acid=1.0, ester=0.5, ethanol=16.0)
    found = [solver.solve(clean + chance.normal(0, 1e-3, len(clean))).concentrations["acid"] for _ in range(2000)]
    expected = 1e-3 * solver._covariance[0, 0] ** 0.5
    assert np.std(found) == pytest.approx(expected, rel=0.06)
    assert np.mean(found) == pytest.approx(1.0, abs=4 * expected / 2000**0.5)


def test_no_concentration_is_negative_and_conversion_stays_within_one():
    chance = np.random.default_rng(4)
    clean = mixture(acid=1.0, ethanol=16.0)
    results = [unmixer().solve(clean + chance.normal(0, 2e-3, len(clean))) for _ in range(50)]
    assert min(min(result.concentrations.values()) for result in results) == 0.0
    assert all(0.0 <= result.conversion <= 1.0 for result in results)


def test_own_non_negative_solver_agrees_with_the_library():
    """Against scipy.optimize.nnls, an independent implementation of the same method."""
    chance = np.random.default_rng(5)
    for _ in range(200):
        matrix, target = chance.normal(size=(30, 5)), chance.normal(size=30)
        assert nonnegative_least_squares(matrix, target) == pytest.approx(nnls(matrix, target)[0], abs=1e-9)


def test_twin_columns_still_end():
    matrix = np.ones((6, 2))
    assert nonnegative_least_squares(matrix, np.ones(6)).sum() == pytest.approx(1.0)


def test_conversion_of_pure_solvent_is_not_a_number():
    chance = np.random.default_rng(6)
    clean = mixture(ethanol=17.0)
    assert math.isnan(unmixer().solve(clean).conversion)
    noisy = [unmixer().solve(clean + chance.normal(0, 1e-3, len(clean))).conversion for _ in range(40)]
    assert sum(math.isnan(value) for value in noisy) >= 36


def test_an_unknown_substance_shows_in_the_residual():
    grid = GRID["start_per_cm"] + GRID["step_per_cm"] * np.arange(GRID["points"])
    stranger = 0.05 / (1.0 + (2 * (grid - 1500.0) / 30.0) ** 2)
    assert unmixer().solve(mixture(acid=1.0, ethanol=16.0) + stranger).residual_AU > 5e-3


def test_species_without_bands_and_a_wrong_length_are_refused():
    with pytest.raises(ValueError, match="no absorption band on the grid for gas"):
        unmixer(("acid", "gas"))
    with pytest.raises(ValueError, match="236 points"):
        unmixer().solve([0.0] * 10)


def test_condition_number_is_small_for_parted_bands_and_large_for_twins():
    """Bands that do not touch give a condition number near 1; two the same but for 1 per cm give a large one."""
    numbers = []
    for product_band in (Band(1300.0, 10.0, 1.0), Band(1001.0, 10.0, 1.0)):
        pair = Species("P", "P", 1.0, bands=(product_band,)), Species("A", "A", 1.0, bands=(Band(1000.0, 10.0, 1.0),))
        numbers.append(Unmixer(Chemistry("c", pair, (), "A", "P"), ("A", "P"), path_um=100.0, **GRID).condition_number)
    assert numbers[0] < 3 < 10 < numbers[1]


def test_equivalents_follow_stoichiometry_and_intermediates():
    """2 A -> P (dimer), P -> S: one mole of P or S stands for two of A."""
    steps = reaction({"acid": -2, "ester": 1}), reaction({"ester": -1, "ethanol": 1})
    assert reactant_equivalents(chemistry(*steps, byproducts=("ethanol",))) == {"ester": 2.0, "ethanol": 2.0}


def test_byproducts_count_as_converted():
    byproduct = chemistry(
        reaction({"acid": -1, "ester": 1}), reaction({"acid": -1, "ethanol": 1}), byproducts=("ethanol",)
    )
    solver = Unmixer(byproduct, ("acid", "ester", "ethanol"), path_um=PATH_UM, **GRID)
    assert solver.solve(mixture(acid=1.0, ester=2.0, ethanol=1.0)).conversion == pytest.approx(0.75)
