"""Concentrations from an absorbance spectrum by classical least squares.

Beer-Lambert: ``A(nu) = b * sum_i eps_i(nu) c_i + offset + slope * nu``, with the path ``b`` in cm and the molar
absorptivities ``eps_i`` summed from the Lorentzian bands of the chemistry file. Concentrations, offset and slope are
the least-squares solution (D. M. Haaland and R. G. Easterling, Appl. Spectrosc. 34 (1980) 539). A solution with a
negative concentration is replaced by the non-negative one (C. L. Lawson and R. J. Hanson, Solving Least Squares
Problems, 1974, chapter 23). The residual is reported: when it grows, something is in the cell that the library does
not know (another species, a bubble, a fouled window).

Valid where absorbance is linear, usually below 1.0 to 1.2 AU (common practice, no source).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigd.model.chemistry import Chemistry, Species

Array = NDArray[np.float64]

CM_PER_UM = 1e-4
VISIBLE_MOL_L = 1e-3
"""Below this sum of reactant and products there is nothing to be converted, and conversion is not a number."""
SIGNIFICANT = 3.0
"""The same when the sum is below this many of its standard errors."""


@dataclass(frozen=True, slots=True)
class UnmixResult:
    """``concentrations`` [mol/L] by species id; ``conversion`` of the reactant, 0 to 1, or NaN when neither reactant
    nor product is seen; ``residual_AU``, the root mean square of what the fit leaves [AU]."""

    concentrations: dict[str, float]
    conversion: float
    residual_AU: float


class Unmixer:
    """Un-mixes spectra of one grid. Made once per cell; ``solve`` takes some 20 microseconds.

    ``species_ids`` are the species that absorb (``ValueError`` for one without bands); grid in 1/cm; ``path_um`` the
    optical path [um]. ``measured`` takes the place of the library, which is ``drawn``: absorbance per mol/L in this
    cell, by species. ``condition_number`` is that of the library with columns scaled to length one: relative errors
    of the spectrum may come back that much larger.
    """

    def __init__(
        self,
        chemistry: Chemistry,
        species_ids: Sequence[str],
        start_per_cm: float,
        step_per_cm: float,
        points: int,
        path_um: float,
        measured: Mapping[str, Array] | None = None,
    ) -> None:
        known = chemistry.species_by_id()
        self.species_ids = tuple(species_ids)
        grid = start_per_cm + step_per_cm * np.arange(points, dtype=np.float64)
        self.drawn = {name: reference_spectrum(known[name], grid) * path_um * CM_PER_UM for name in self.species_ids}
        columns = [(measured or self.drawn)[name] for name in self.species_ids]
        pure = np.column_stack(columns)
        blind = [name for name, column in zip(self.species_ids, columns, strict=True) if not column.any()]
        if blind:
            raise ValueError(f"no absorption band on the grid for {', '.join(blind)}")
        if points < len(columns) + 2:
            raise ValueError(f"{points} points cannot tell {len(columns)} species, an offset and a slope")
        baseline = np.column_stack([np.ones(points), np.linspace(-1.0, 1.0, points)])
        self._library = np.hstack([pure, baseline])
        scale = np.linalg.norm(self._library, axis=0)
        self.condition_number = float(np.linalg.cond(self._library / scale))
        self._inverse = np.linalg.pinv(self._library / scale) / scale[:, None]
        self._covariance = self._inverse @ self._inverse.T
        self._flat = np.linalg.qr(baseline)[0]
        self._pure_without_baseline = pure - self._flat @ (self._flat.T @ pure)
        self._weights = _conversion_weights(chemistry, self.species_ids)

    def solve(self, absorbance: Sequence[float]) -> UnmixResult:
        """Concentrations behind ``absorbance`` [AU], one value per grid point; ``ValueError`` for another length."""
        spectrum = np.asarray(absorbance, dtype=np.float64)
        if spectrum.shape != (len(self._library),):
            raise ValueError(f"a spectrum of {len(self._library)} points is needed, not of shape {spectrum.shape}")
        count = len(self.species_ids)
        amounts = (self._inverse @ spectrum)[:count]
        if (amounts < 0.0).any():
            amounts = nonnegative_least_squares(self._pure_without_baseline, self._without_baseline(spectrum))
        left = self._without_baseline(spectrum) - self._pure_without_baseline @ amounts
        rss = float(left @ left)
        sigma_squared = rss / (len(spectrum) - count - 2)
        return UnmixResult(
            dict(zip(self.species_ids, (float(amount) for amount in amounts), strict=True)),
            self._conversion(amounts, sigma_squared),
            (rss / len(spectrum)) ** 0.5,
        )

    def _without_baseline(self, spectrum: Array) -> Array:
        flattened: Array = spectrum - self._flat @ (self._flat.T @ spectrum)
        return flattened

    def _conversion(self, amounts: Array, sigma_squared: float) -> float:
        if self._weights is None:
            return float("nan")
        made, all_of_it = self._weights
        total = float(all_of_it @ amounts)
        count = len(self.species_ids)
        variance = float(all_of_it @ self._covariance[:count, :count] @ all_of_it) * sigma_squared
        if total < max(VISIBLE_MOL_L, SIGNIFICANT * variance**0.5):
            return float("nan")
        return float(made @ amounts) / total


def reference_spectrum(species: Species, grid_per_cm: Array) -> Array:
    """Molar absorptivity [L/(mol cm)] on a grid [1/cm]: the sum of the species' Lorentzian bands.

    Each band is ``eps / (1 + (2 (nu - centre) / width)^2)``, width at half height.

    >>> from rigd.model.chemistry import Band
    >>> ester = Species("P", "ester", 88.11, bands=(Band(1740.0, 24.0, 380.0),))
    >>> reference_spectrum(ester, np.array([1740.0, 1752.0])).tolist()
    [380.0, 190.0]
    """
    total = np.zeros_like(grid_per_cm, dtype=np.float64)
    for band in species.bands:
        total += band.absorptivity / (1.0 + (2.0 * (grid_per_cm - band.centre_per_cm) / band.width_per_cm) ** 2)
    return total


def nonnegative_least_squares(matrix: Array, target: Array) -> Array:
    """The ``x >= 0`` that minimises ``|matrix x - target|``: the active-set method of Lawson and Hanson (1974).

    Own code because importing scipy's would hold the caller up for a third of a second; a test compares the two.
    Always ends: should rounding keep nearly dependent columns going in and out, the last feasible point is returned.
    """
    columns = matrix.shape[1]
    solution = np.zeros(columns)
    free = np.zeros(columns, dtype=bool)
    small = 1e-12 * float(np.abs(matrix.T @ target).max(initial=0.0))
    for _ in range(10 * columns + 10):
        gradient = matrix.T @ (target - matrix @ solution)
        if free.all() or float(gradient[~free].max()) <= small:
            break
        free[int(np.argmax(np.where(free, -np.inf, gradient)))] = True
        solution = _into_the_feasible(matrix, target, solution, free)
    return solution


def _into_the_feasible(matrix: Array, target: Array, solution: Array, free: NDArray[np.bool_]) -> Array:
    """Inner loop of the method: step towards the unconstrained solution, fixing what would become negative."""
    while True:
        wanted = np.zeros_like(solution)
        wanted[free] = np.linalg.lstsq(matrix[:, free], target, rcond=None)[0]
        falling = free & (wanted <= 0.0)
        if not falling.any():
            return wanted
        step = float((solution[falling] / (solution[falling] - wanted[falling])).min())
        solution = solution + step * (wanted - solution)
        free &= solution > 1e-15
        solution = np.where(free, solution, 0.0)


def reactant_equivalents(chemistry: Chemistry) -> dict[str, float]:
    """Moles of reactant that one mole of each product or by-product has used up, by the stoichiometry.

    Follows intermediates (A to P, then P to S); a product that no reaction links to the reactant counts one to one.
    """
    known = {chemistry.reactant: 1.0}
    for _ in chemistry.reactions:
        for reaction in chemistry.reactions:
            sources = [name for name, count in reaction.stoichiometry.items() if count < 0 and name in known]
            if not sources:
                continue
            spent = sum(known[name] * -reaction.stoichiometry[name] for name in sources)
            for name in (chemistry.product, *chemistry.byproducts):
                made = reaction.stoichiometry.get(name, 0.0)
                if made > 0 and name not in known:
                    known[name] = spent / made
    return {name: known.get(name, 1.0) for name in (chemistry.product, *chemistry.byproducts)}


def _conversion_weights(chemistry: Chemistry, species_ids: tuple[str, ...]) -> tuple[Array, Array] | None:
    """Weights of (what was made, what was made plus what is left), or ``None`` when the cell does not see both."""
    if chemistry.reactant not in species_ids or chemistry.product not in species_ids:
        return None
    equivalents = reactant_equivalents(chemistry)
    made = np.array([equivalents.get(name, 0.0) for name in species_ids])
    left = np.array([1.0 if name == chemistry.reactant else 0.0 for name in species_ids])
    return made, made + left
