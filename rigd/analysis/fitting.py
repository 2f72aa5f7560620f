"""Non-linear least squares with standard errors, started from several places.

Minimises ``sum(((y - model(x, parameters)) / sigma)^2)``. The Jacobian is taken by a complex step (W. Squire and
G. Trapp, SIAM Review 40 (1998) 110-112), exact to rounding, so ``model`` must be made of analytic numpy functions.
Standard errors are from the linearised covariance ``s^2 (J^T J)^-1`` at the minimum. Held against the certified values
of the NIST Statistical Reference Datasets, non-linear regression (tests/reference/nist_strd).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
AnyArray = NDArray[Any]
Model = Callable[[Array, AnyArray], AnyArray]
"""``model(x, parameters) -> y``; must take complex parameters."""

_COMPLEX_STEP = 1e-30
_SPREAD_DECADES = 1.5
_EXTRA_STARTS = 8
_HOPELESS = 1e140


@dataclass(frozen=True, slots=True)
class Fit:
    """The minimum: parameters with standard errors, residual sum of squares (weighted when sigma was given), residual
    standard deviation, and how many data points it rests on."""

    parameters: tuple[float, ...]
    standard_errors: tuple[float, ...]
    residual_sum_of_squares: float
    residual_sd: float
    points: int


class FitError(ValueError):
    """No fit: too few points, no start that works, or data that do not determine the parameters."""


def fit(
    model: Model, x: Sequence[float], y: Sequence[float], start: Sequence[float], sigma: Sequence[float] = ()
) -> Fit:
    """Fit ``model`` to (x, y); ``start`` should be within some decades of the answer and have the right signs.

    The start is tried first, then points spread about it (8, log-uniform within 1.5 decades, always the same ones);
    the lowest minimum wins. Raises ``FitError`` when there are not more points than parameters, or nothing converges.
    """
    at, seen, first = (np.asarray(values, dtype=np.float64) for values in (x, y, start))
    weight = 1.0 / np.asarray(sigma, dtype=np.float64) if len(sigma) else np.ones_like(seen)
    if len(seen) <= len(first):
        raise FitError(f"{len(seen)} points cannot give {len(first)} parameters with their errors")
    problem = _Problem(model, at, seen, weight)
    best: Array | None = None
    for candidate in _starts(first):
        found = problem.minimise(candidate)
        if found is not None and (best is None or problem.cost(found) < problem.cost(best) * (1 - 1e-10)):
            best = found
    if best is None:
        raise FitError("no starting point leads to a minimum")
    return _with_errors(problem, problem.polish(best))


@dataclass(frozen=True, slots=True)
class _Problem:
    model: Model
    x: Array
    y: Array
    weight: Array

    def residuals(self, parameters: Array) -> Array:
        with np.errstate(all="ignore"):
            predicted = np.asarray(self.model(self.x, parameters), dtype=np.float64)
        return np.clip(np.nan_to_num((predicted - self.y) * self.weight, nan=_HOPELESS), -_HOPELESS, _HOPELESS)

    def jacobian(self, parameters: Array) -> Array:
        columns = []
        for index in range(len(parameters)):
            stepped = parameters.astype(np.complex128)
            stepped[index] += 1j * _COMPLEX_STEP
            with np.errstate(all="ignore"):
                columns.append(np.imag(self.model(self.x, stepped)) / _COMPLEX_STEP * self.weight)
        return np.nan_to_num(np.column_stack(columns), nan=0.0, posinf=0.0, neginf=0.0)

    def cost(self, parameters: Array) -> float:
        left = self.residuals(parameters)
        return float(left @ left)

    def minimise(self, start: Array) -> Array | None:
        """Trust-region least squares from one start; ``None`` when it starts or ends nowhere."""
        from scipy.optimize import least_squares

        if self.cost(start) > _HOPELESS**2 / 2:
            return None
        with np.errstate(all="ignore"):
            found = least_squares(
                self.residuals,
                start,
                self.jacobian,
                method="trf",
                x_scale="jac",
                xtol=1e-15,
                ftol=1e-15,
                gtol=1e-15,
                max_nfev=1000 * len(start),
            )
        return np.asarray(found.x, dtype=np.float64) if np.isfinite(found.cost) else None

    def polish(self, parameters: Array) -> Array:
        """A few Gauss-Newton steps by QR, taken while they help: the last digits that a trust region leaves."""
        for _ in range(20):
            step = np.linalg.lstsq(self.jacobian(parameters), -self.residuals(parameters), rcond=None)[0]
            if not self.cost(parameters + step) < self.cost(parameters):
                break
            parameters = parameters + step
        return parameters


def _starts(first: Array) -> list[Array]:
    chance = np.random.Generator(np.random.PCG64(20))
    factors = 10.0 ** chance.uniform(-_SPREAD_DECADES, _SPREAD_DECADES, size=(_EXTRA_STARTS, len(first)))
    return [first, *(first * factor for factor in factors)]


def _with_errors(problem: _Problem, parameters: Array) -> Fit:
    jacobian, rss = problem.jacobian(parameters), problem.cost(parameters)
    freedom = len(problem.y) - len(parameters)
    scale = np.linalg.norm(jacobian, axis=0)
    if not scale.all() or np.linalg.matrix_rank(jacobian / scale) < len(parameters):
        raise FitError("the data do not determine the parameters")
    upper = np.linalg.qr(jacobian / scale, mode="r")
    errors = np.linalg.norm(np.linalg.inv(upper), axis=1) / scale * (rss / freedom) ** 0.5
    return Fit(tuple(map(float, parameters)), tuple(map(float, errors)), rss, (rss / freedom) ** 0.5, len(problem.y))
