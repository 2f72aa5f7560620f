"""Measured references against a library that is wrong: what comes out is what was put in."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from rigd.analysis.references import Reference, likeness, mean_of, measured_library, without_baseline
from rigd.analysis.unmix import Unmixer, reference_spectrum
from rigd.model.chemistry import Band, Chemistry, Species

GRID = 860.0 + 4.0 * np.arange(236)
PATH_CM = 0.0025


def species(name: str, *bands: tuple[float, float, float]) -> Species:
    return Species(name, name, 50.0, bands=tuple(Band(*band) for band in bands))


SOLVENT = species("solvent", (1047, 22, 20), (880, 14, 8))
ACID = species("acid", (1715, 30, 300))
ESTER = species("ester", (1740, 24, 380))
CHEMISTRY = Chemistry("test", (SOLVENT, ACID, ESTER), (), "acid", "ester")


def true_spectrum(amounts: dict[str, float], offset: float = 0.0) -> np.ndarray:
    """In truth the solvent's bands are 15 % stronger and shifted, and the acid's is wider, than in the library."""
    true = {
        "solvent": species("solvent", (1050, 22, 23), (883, 14, 9.2)),
        "acid": replace(ACID, bands=(Band(1717, 34, 280),)),
        "ester": ESTER,
    }
    total = sum(c * reference_spectrum(true[name], GRID) * PATH_CM for name, c in amounts.items())
    return np.asarray(total + offset + 1e-5 * (GRID - 1300))


def drawn() -> dict[str, np.ndarray]:
    return {one.id: reference_spectrum(one, GRID) * PATH_CM for one in CHEMISTRY.species}


def error(measured: dict[str, np.ndarray] | None) -> float:
    unmixer = Unmixer(CHEMISTRY, ("solvent", "acid", "ester"), 860.0, 4.0, 236, 25.0, measured)
    worst = 0.0
    for conversion in (0.2, 0.5, 0.8):
        amounts = {"solvent": 16.0, "acid": 1 - conversion, "ester": conversion}
        worst = max(worst, abs(unmixer.solve(true_spectrum(amounts, 0.02).tolist()).conversion - conversion))
    return worst


def test_blank_and_feed_take_the_bias_of_the_library_away() -> None:
    blank = Reference("solvent", {"solvent": 17.0}, true_spectrum({"solvent": 17.0}, 0.05))
    feed = Reference("feed", {"solvent": 15.1, "acid": 2.0}, true_spectrum({"solvent": 15.1, "acid": 2.0}, -0.03))
    without, with_both = error(None), error(measured_library([blank, feed], drawn()))
    assert without > 0.02
    assert with_both < 1e-3
    assert error(measured_library([blank], drawn())) <= without + 1e-9


def test_a_species_in_no_reference_stays_and_a_blank_is_what_was_measured() -> None:
    seen = true_spectrum({"solvent": 17.0}, 0.05)
    found = measured_library([Reference("solvent", {"solvent": 17.0}, seen)], drawn())
    assert np.allclose(found["ester"], drawn()["ester"])
    assert np.allclose(without_baseline(found["solvent"] * 17.0), without_baseline(seen), atol=1e-12)
    one = measured_library(
        [Reference("feed", {"solvent": 15.1, "acid": 2.0}, true_spectrum({"solvent": 15.1, "acid": 2.0}))], drawn()
    )
    told = 15.1 * one["solvent"] + 2.0 * one["acid"]  # not determined each, but together
    assert np.allclose(
        without_baseline(told), without_baseline(true_spectrum({"solvent": 15.1, "acid": 2.0})), atol=1e-12
    )


def test_another_liquid_is_not_alike_and_an_unsteady_cell_has_no_mean() -> None:
    right = Reference("solvent", {"solvent": 17.0}, true_spectrum({"solvent": 17.0}))
    wrong = Reference("feed", {"acid": 2.0}, true_spectrum({"solvent": 17.0}))
    assert likeness(right, drawn()) > 0.9
    assert likeness(wrong, drawn()) < 0.3
    assert likeness(Reference("x", {}, np.ones(236)), drawn()) == 0.0
    steady = [true_spectrum({"solvent": 17.0}) + 1e-5 * i for i in range(4)]
    assert np.allclose(mean_of(steady), true_spectrum({"solvent": 17.0}) + 1.5e-5)
    with pytest.raises(ValueError, match="not steady"):
        mean_of([true_spectrum({"solvent": c}) for c in (17.0, 15.0, 13.0)])
