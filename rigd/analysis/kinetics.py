"""Rate constants from conversion against residence time in a plug-flow column.

Closed forms at constant density and temperature (O. Levenspiel, Chemical Reaction Engineering, 3rd ed., chapters 3
and 5), with ``a`` and ``b`` the concentrations [mol/L] of the reactant and its partner after the mixing tee and ``tau``
the residence time [s]:

    first order         X = 1 - exp(-k tau)
    second order        X = M (E - 1) / (M E - 1),  M = b/a,  E = exp(k tau (b - a));  a = b: k a tau / (1 + k a tau)
    reversible          dx/dt = k [(a - x)(b - x) - x^2 / K],  solved by the roots of its right side

``k`` is for the volume that the residence time is reckoned with: quoted per interstitial, per bed or per catalyst mass
it differs by factors of two to three, the commonest hidden error. Diffusion, dispersion and loss of activity stay in
``k``: it is apparent.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigd.analysis.fitting import AnyArray, Array, FitError, fit
from rigd.model.chemistry import Chemistry, RateLaw, Reaction

_SAME = 1e-6
"""Relative difference of a and b below which the limit for equal feeds is used."""


class Law(StrEnum):
    """The rate laws that can be fitted; values are for people."""

    FIRST = "first order"
    SECOND = "second order"
    REVERSIBLE = "second order, reversible"
    APPARENT = "apparent first order"


UNITS = {Law.FIRST: "1/s", Law.SECOND: "L/(mol s)", Law.REVERSIBLE: "L/(mol s)", Law.APPARENT: "1/s"}


@dataclass(frozen=True, slots=True)
class Feed:
    """Concentrations after the tee [mol/L]: reactant and its partner (0 when there is none)."""

    reactant: float
    partner: float = 0.0


@dataclass(frozen=True, slots=True)
class RateFit:
    """``k`` with its standard error (``unit``), residual standard deviation of conversion, number of points."""

    law: Law
    k: float
    k_error: float
    unit: str
    residual_sd: float
    points: int
    equilibrium_constant: float = 0.0


def conversion(law: Law, k: float, tau_s: float, feed: Feed = Feed(1.0), equilibrium_constant: float = 0.0) -> float:
    """Conversion of the reactant, 0 to 1.

    >>> round(conversion(Law.SECOND, 0.01, 300.0, Feed(0.5, 0.75)), 10)
    0.7701677802
    """
    return float(np.real(_curve(law, np.asarray(k), np.array([tau_s]), (feed,), equilibrium_constant)[0]))


def fit_rate_constant(
    law: Law,
    tau_s: Sequence[float],
    conversions: Sequence[float],
    feeds: Sequence[Feed] = (),
    equilibrium_constant: float = 0.0,
    sigma: Sequence[float] = (),
) -> RateFit:
    """Fit ``k`` to conversions (0 to 1) at residence times [s]; ``feeds`` one per point (not needed for first order).

    ln k is fitted, which keeps k positive; its error is carried over. ``sigma``: one standard deviation per conversion.
    Raises ``FitError`` for fewer than two points or conversions that determine nothing (all zero, all complete).
    """
    feeds = tuple(feeds) or (Feed(1.0),) * len(tau_s)
    usable = [max(min(value, 0.98), 0.005) for value in conversions]
    guesses = [
        -math.log1p(-x) / (tau * max(feed.partner, 1.0)) for x, tau, feed in zip(usable, tau_s, feeds, strict=True)
    ]
    if len(guesses) < 2:
        raise FitError("a rate constant with an error needs two points at least")

    def model(tau: Array, log_k: AnyArray) -> AnyArray:
        return _curve(law, np.exp(log_k[0]), tau, feeds, equilibrium_constant)

    found = fit(model, tau_s, conversions, (math.log(sorted(guesses)[len(guesses) // 2]),), sigma)
    k = math.exp(found.parameters[0])
    error = k * found.standard_errors[0]
    return RateFit(law, k, error, UNITS[law], found.residual_sd, found.points, equilibrium_constant)


def law_of(chemistry: Chemistry) -> tuple[Law, str, float]:
    """Law that the main reaction declares, id of the reactant's partner ("" for none), and equilibrium constant.

    A rate law that has no closed form here (adsorption, other orders, parallel reactions of the reactant) is answered
    with ``Law.APPARENT``: a number to compare runs by, not a constant of the reaction.
    """
    main = [reaction for reaction in chemistry.reactions if reaction.stoichiometry.get(chemistry.reactant, 0.0) < 0]
    if len(main) != 1 or main[0].per_gram:
        return Law.APPARENT, "", 0.0
    return _law_of_reaction(main[0], chemistry.reactant)


def feed_after_tee(
    flows_mL_min: Mapping[str, float], compositions: Mapping[str, Mapping[str, float]], reactant: str, partner: str
) -> Feed:
    """Mixed concentrations from the flow of each pump and the composition [mol/L] of what it delivers."""
    total = sum(flows_mL_min.values())
    if total <= 0:
        raise FitError("no flow, no feed")

    def mixed(species: str) -> float:
        parts = (flow * compositions.get(pump, {}).get(species, 0.0) for pump, flow in flows_mL_min.items())
        return sum(parts) / total

    return Feed(mixed(reactant), mixed(partner) if partner else 0.0)


def _law_of_reaction(reaction: Reaction, reactant: str) -> tuple[Law, str, float]:
    orders = {name: order for name, order in reaction.orders.items() if order}
    partners = [name for name in orders if name != reactant]
    ones = all(order == 1.0 for order in orders.values())
    counts = all(abs(count) == 1.0 for count in reaction.stoichiometry.values())
    if reaction.law is RateLaw.POWER and ones and reactant in orders and not partners:
        return Law.FIRST, "", 0.0
    if reaction.law is RateLaw.POWER and ones and counts and reactant in orders and len(partners) == 1:
        return Law.SECOND, partners[0], 0.0
    two_back = sum(reaction.reverse_orders.values()) == 2.0 and len(reaction.reverse_orders) == 2
    if reaction.law is RateLaw.REVERSIBLE and ones and counts and len(partners) == 1 and two_back:
        return Law.REVERSIBLE, partners[0], reaction.equilibrium_constant
    return Law.APPARENT, "", 0.0


def _curve(law: Law, k: NDArray[Any], tau: Array, feeds: Sequence[Feed], constant: float) -> AnyArray:
    if law in (Law.FIRST, Law.APPARENT):
        return np.asarray(1.0 - np.exp(-k * tau))
    pairs = zip(tau, feeds, strict=True)
    if law is Law.SECOND:
        return np.array([_second_order(k, time, feed.reactant, feed.partner) for time, feed in pairs])
    return np.array([_reversible(k, time, feed.reactant, feed.partner, constant) for time, feed in pairs])


def _second_order(k: NDArray[Any], tau: float, a: float, b: float) -> NDArray[Any]:
    if abs(b / a - 1.0) < _SAME:
        return np.asarray(k * a * tau / (1.0 + k * a * tau))
    if b > a:  # written with a decaying exponential, or a long residence time overflows
        gone = np.exp(-k * tau * (b - a))
        return np.asarray((b / a) * (1.0 - gone) / (b / a - gone))
    grown = np.exp(k * tau * (b - a))
    return np.asarray((b / a) * (grown - 1.0) / (b / a * grown - 1.0))


def _reversible(k: NDArray[Any], tau: float, a: float, b: float, constant: float) -> NDArray[Any]:
    """Roots x1 < x2 of ``(1 - 1/K) x^2 - (a + b) x + a b``; for K = 1 it is linear in x and relaxes to ab/(a + b)."""
    lead = 1.0 - 1.0 / constant
    if abs(lead) < 1e-9:
        return np.asarray(b / (a + b) * (1.0 - np.exp(-k * (a + b) * tau)))
    root = math.sqrt((a + b) ** 2 - 4.0 * lead * a * b)
    near = 2.0 * a * b / (a + b + root)  # the smaller root without cancellation
    decay = np.exp(-k * root * tau)
    far_inverse = lead * near / (a * b)  # 1/x2 from x1 x2 = ab/lead: finite also when x2 is far away or negative
    return np.asarray(near * (1.0 - decay) / (1.0 - near * far_inverse * decay) / a)
