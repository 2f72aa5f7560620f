"""Pure spectra from measured references: what a blank and the pure feeds say about the library.

Each reference is the spectrum of a liquid of known composition, ``A = sum_i c_i S_i`` with ``S_i`` the absorbance of a
species per mol/L in this cell. The library's ``S`` is changed as little as the references ask for: ``S = S0 +
pinv(C) (A - C S0)``, offset and slope of each reference left out (the minimum-norm solution of the under-determined
classical calibration, as of H. Martens and T. Naes, Multivariate Calibration, 1989, chapter 3). Where the references
determine a species it becomes what was measured; a species in no reference stays as it is in the library.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

ALIKE_LEAST = 0.7
"""Smallest correlation of a reference with what the library expects of that liquid: below, another liquid is in the
cell, or none (proposal; no source)."""
SCATTER_MOST = 0.02
"""Largest scatter of the spectra of one reference over their size (proposal; no source)."""


@dataclass(frozen=True, slots=True, eq=False)
class Reference:
    """The mean spectrum [AU] of a liquid and the concentrations [mol/L] of the species in it."""

    liquid: str
    composition: Mapping[str, float]
    absorbance: Array


def mean_of(spectra: Sequence[Sequence[float]]) -> Array:
    """The mean of some spectra of one liquid; ``ValueError`` when they are not alike enough to be one."""
    stack = np.asarray(spectra, dtype=np.float64)
    mean: Array = stack.mean(axis=0)
    size = float(np.sqrt(np.mean(without_baseline(mean) ** 2)))
    scatter = float(np.sqrt(np.mean((stack - mean) ** 2)))
    if scatter > SCATTER_MOST * max(size, 1e-3):
        raise ValueError(f"the last {len(stack)} spectra scatter by {scatter:.2g} AU: the cell is not steady")
    return mean


def likeness(reference: Reference, library: Mapping[str, Array]) -> float:
    """Correlation of the reference with what the library expects of its composition, both without offset and slope."""
    expected = without_baseline(_expected(reference, library))
    found = without_baseline(reference.absorbance)
    size = float(np.linalg.norm(expected) * np.linalg.norm(found))
    return float(expected @ found) / size if size > 0 else 0.0


def measured_library(references: Sequence[Reference], library: Mapping[str, Array]) -> dict[str, Array]:
    """The library [AU per mol/L] as the references correct it; columns by species."""
    names = list(library)
    start = np.array([library[name] for name in names])
    amounts = np.array([[one.composition.get(name, 0.0) for name in names] for one in references])
    off = np.array([without_baseline(one.absorbance - _expected(one, library)) for one in references])
    corrected = start + np.linalg.pinv(amounts) @ off
    return dict(zip(names, corrected, strict=True))


def without_baseline(spectrum: Array) -> Array:
    """The spectrum less its best offset and slope."""
    points = len(spectrum)
    flat = np.linalg.qr(np.column_stack([np.ones(points), np.linspace(-1.0, 1.0, points)]))[0]
    left: Array = spectrum - flat @ (flat.T @ spectrum)
    return left


def _expected(reference: Reference, library: Mapping[str, Array]) -> Array:
    total: Array = np.zeros_like(reference.absorbance)
    for name, column in library.items():
        total = total + reference.composition.get(name, 0.0) * column
    return total
