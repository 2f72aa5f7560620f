"""Residence-time distributions of a flow path: variance, step response, and how long to wait after a step.

Dimensionless throughout: ``theta`` is time over the mean residence time, ``Pe`` the vessel Peclet (Bodenstein) number
``u L / D`` with the *interstitial* velocity. Closed-closed vessel: O. Levenspiel, Chemical Reaction Engineering, 3rd
ed., chapter 13; P. V. Danckwerts, Chem. Eng. Sci. 2 (1953) 1-13. Times and variances of parts in series add, so
``series`` gives the whole path from its parts.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

PE_LEAST, PE_MOST = 0.5, 1e5
"""Range of Peclet numbers that the inversion below is tested for; beyond, use ``wait_tanks`` with one tank or none."""


@dataclass(frozen=True, slots=True)
class Spread:
    """Mean residence time [s] and variance [s^2] of a part or a path."""

    mean_s: float
    variance_s2: float

    @property
    def tanks(self) -> float:
        """Number of equal stirred tanks in series with the same spread, ``mean^2 / variance``; infinite for a plug."""
        return self.mean_s**2 / self.variance_s2 if self.variance_s2 > 0 else math.inf


def closed_variance(peclet: float) -> float:
    """Variance of theta in a closed-closed vessel: ``2/Pe - (2/Pe^2)(1 - exp(-Pe))`` (van der Laan 1958).

    Raises ``ValueError`` unless ``peclet`` is positive.

    >>> round(closed_variance(10.0), 10)
    0.180000908
    """
    if not peclet > 0:
        raise ValueError(f"a Peclet number is positive, not {peclet}")
    if peclet < 1e-3:  # the closed form loses digits; 1 - Pe/3 is its series
        return 1.0 - peclet / 3.0
    return 2.0 / peclet + 2.0 / peclet**2 * math.expm1(-peclet)


def open_variance(peclet: float) -> float:
    """Variance of theta in an open-open vessel, ``2/Pe + 8/Pe^2`` (its mean is ``1 + 2/Pe``)."""
    if not peclet > 0:
        raise ValueError(f"a Peclet number is positive, not {peclet}")
    return 2.0 / peclet + 8.0 / peclet**2


def series(parts: Iterable[Spread]) -> Spread:
    """The whole of parts in series: means add, variances add (independent parts)."""
    listed = tuple(parts)
    return Spread(sum(part.mean_s for part in listed), sum(part.variance_s2 for part in listed))


def step_response(peclet: float, theta: float) -> float:
    """Outlet over inlet ``F(theta)`` after a step, closed-closed vessel, ``PE_LEAST`` to ``PE_MOST``.

    Fourier inversion of the transfer function (J. Gil-Pelaez, Biometrika 38 (1951) 481-482): stable at every Peclet
    number, where the eigen-series cancels and Laplace inversion fails. Absolute error below 1e-8.
    """
    frequency, spectrum = _spectrum(peclet)
    return _distribution(frequency, spectrum, theta)


def wait_closed(peclet: float, fraction: float) -> float:
    """Theta at which an inert front has reached ``fraction`` (0.0001 to 0.9999) behind a closed-closed vessel."""
    frequency, spectrum = _spectrum(peclet)
    _check_fraction(fraction)
    low, high = 0.0, 2.0
    while _distribution(frequency, spectrum, high) < fraction:
        high *= 2.0
    while high - low > 1e-9:
        middle = 0.5 * (low + high)
        if _distribution(frequency, spectrum, middle) < fraction:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


def wait_tanks(tanks: float, fraction: float) -> float:
    """Theta at which a front has reached ``fraction`` behind ``tanks`` stirred tanks (gamma distribution)."""
    from scipy.stats import gamma

    _check_fraction(fraction)
    if math.isinf(tanks):
        return 1.0
    return float(gamma.ppf(fraction, tanks, scale=1.0 / tanks))


def wait_s(path: Spread, fraction: float) -> float:
    """Time [s] until a front has reached ``fraction`` behind a whole path, taken as its equivalent tanks in series."""
    return path.mean_s * wait_tanks(path.tanks, fraction)


def _check_fraction(fraction: float) -> None:
    if not 1e-4 <= fraction <= 1 - 1e-4:
        raise ValueError(f"the fraction of a front lies between 0.0001 and 0.9999, not at {fraction}")


def _spectrum(peclet: float) -> tuple[NDArray[np.float64], NDArray[np.complex128]]:
    """Frequencies at the mid-points of even steps, and the transfer function there.

    The step is 2 pi over a span in which the washed-out tail has died (1e-12); the last frequency is where the transfer
    function has (1e-14).
    """
    if not PE_LEAST <= peclet <= PE_MOST:
        raise ValueError(f"Peclet numbers from {PE_LEAST} to {PE_MOST} are covered, not {peclet}")
    span = 4.0 + 60.0 * math.sqrt(closed_variance(peclet))
    last = max(2 * 34.0**2 / peclet, 9.0 * math.sqrt(peclet)) * 1.3
    step = 2 * math.pi / span
    frequency = (np.arange(math.ceil(last / step), dtype=np.float64) + 0.5) * step
    root = np.sqrt(1.0 - 4.0j * frequency / peclet)
    spectrum = 4 * root * np.exp(peclet / 2 * (1 - root)) / ((1 + root) ** 2 - (1 - root) ** 2 * np.exp(-root * peclet))
    return frequency, spectrum


def _distribution(frequency: NDArray[np.float64], spectrum: NDArray[np.complex128], theta: float) -> float:
    step = 2 * float(frequency[0])
    turned = np.imag(np.exp(-1j * frequency * theta) * spectrum) / frequency
    return 0.5 - step / math.pi * float(turned.sum())
