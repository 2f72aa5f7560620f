"""The rate constant behind the points of a run, per temperature, with the curve to draw."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigd.analysis.fitting import FitError
from rigd.analysis.kinetics import Feed, Law, RateFit, conversion, feed_after_tee, fit_rate_constant, law_of
from rigd.model.recipe import PointKind
from rigd.model.rig import LiquidRole, RigDefinition
from rigd.report.cold_entry import ROOM_DEGC, cold_entry
from rigd.report.data import PointRow, RunData

CURVE_POINTS = 120
EVEN = 0.01
"""Relative change of k below which the bed's own temperature is not drawn apart."""
KELVIN, GAS_CONSTANT = 273.15, 8.314462618
"""CODATA 2018, exact."""


@dataclass(frozen=True, slots=True)
class Kinetics:
    """One fit: ``k`` at ``temperature_degC``, from which points, and what to draw over residence time [s].

    ``curve`` is the fit with each point's own bed temperature, ``even`` what it gives at exactly ``temperature_degC``
    (empty when the points were there anyway). ``activation_kJ_mol`` is the declared energy that was used for that.
    """

    temperature_degC: float
    fit: RateFit
    feed: Feed
    used: tuple[str, ...]
    curve: tuple[tuple[float, float], ...]
    even: tuple[tuple[float, float], ...] = ()
    activation_kJ_mol: float = 0.0


@dataclass(frozen=True, slots=True)
class KineticsResult:
    """The fits, and in words what could not be fitted."""

    fits: tuple[Kinetics, ...]
    remarks: tuple[str, ...]


def kinetics_of(run: RunData) -> KineticsResult:
    """Fit each temperature that has two usable points. A point counts when it was settled and its conversion was read;
    returns to an earlier point count too (they carry the loss of activity into the scatter)."""
    basis = _basis(run.rig)
    usable = [point for point in run.points if _usable(point)]
    fits: list[Kinetics] = []
    remarks: list[str] = []
    for temperature in sorted({round(point.temperature_degC, 1) for point in usable}):
        here = [point for point in usable if round(point.temperature_degC, 1) == temperature]
        try:
            fits.append(_fit(temperature, here, [_feed(run.rig, point, basis.partner) for point in here], basis))
        except FitError as error:
            remarks.append(f"No rate constant at {temperature:g} degC: {error}.")
        else:
            remarks += _entry_remark(temperature, here, basis)
    left_out = [point.id for point in run.points if point.kind != PointKind.BLANK and not _usable(point)]
    if left_out:
        remarks.append(f"Not in the fit (not settled, or no conversion read): {', '.join(left_out)}.")
    return KineticsResult(tuple(fits), tuple(remarks))


def _entry_remark(temperature: float, points: list[PointRow], basis: _Basis) -> list[str]:
    """What a cold entry does to k: an estimate in words, not applied."""
    shares = cold_entry(points, temperature, basis.activation_kJ_mol) if basis.in_middle else None
    if shares is None:
        return []
    low, high = (100 * (1 - share) for share in reversed(shares))
    remark = (
        f"Liquid enters the bed cold: the fastest point's sensor in mid-bed was below {temperature:g} °C. If it entered"
        f" at {ROOM_DEGC:g} °C and warmed up evenly from the jacket, the mean rate in the bed was {low:.0f} to"
        f" {high:.0f} % below that at the sensor, so k is too low by about as much. An estimate; k is not corrected"
        " for it. A preheating length before the column removes it."
    )
    return [remark]


def reagent_compositions(rig: RigDefinition) -> dict[str, dict[str, float]]:
    """What each pump delivers in the sweep [mol/L]: its reagent, or its solvent where it has no reagent."""
    from rigd.logic.flow_path import flow_path

    liquids = {liquid.id: liquid for liquid in rig.liquids}
    compositions = {}
    for feed in flow_path(rig).feeds:
        ranked = sorted(feed.supply.values(), key=lambda name: liquids[name].role is not LiquidRole.REAGENT)
        compositions[feed.pump] = dict(liquids[ranked[0]].composition_mol_L)
    return compositions


def _usable(point: PointRow) -> bool:
    measured = math.isfinite(point.conversion) and math.isfinite(point.residence_time_s) and point.residence_time_s > 0
    return point.kind != PointKind.BLANK and point.settled and measured


def _feed(rig: RigDefinition | None, point: PointRow, partner: str) -> Feed:
    if rig is None:
        return Feed(1.0)
    feed = feed_after_tee(point.flows_mL_min, reagent_compositions(rig), rig.chemistry.reactant, partner)
    if feed.reactant <= 0:
        raise FitError("no liquid of the rig file brings the reactant")
    return feed


@dataclass(frozen=True, slots=True)
class _Basis:
    """What the files say: rate law, partner, equilibrium constant, activation energy, and which part of the liquid in
    the columns lies between the beads (``k`` refers to that liquid, as in the chemistry file); whether a sensor sits in
    the middle of a bed."""

    law: Law = Law.APPARENT
    partner: str = ""
    constant: float = 0.0
    activation_kJ_mol: float = 0.0
    between_beads: float = 1.0
    in_middle: bool = False


def _basis(rig: RigDefinition | None) -> _Basis:
    if rig is None:
        return _Basis()
    from rigd.logic.flow_path import flow_path

    law, partner, constant = law_of(rig.chemistry)
    path = flow_path(rig)
    reactions = [one for one in rig.chemistry.reactions if one.stoichiometry.get(rig.chemistry.reactant, 0.0) < 0]
    energy = reactions[0].activation_energy_kJ_mol if len(reactions) == 1 else 0.0
    between = path.interstitial_mL / path.column_mL if path.column_mL else 1.0
    in_middle = any(tag.measures == "temperature" and tag.at.endswith(".middle") for tag in rig.tags)
    return _Basis(law, partner, constant, energy, between, in_middle)


def _fit(temperature: float, points: list[PointRow], feeds: list[Feed], basis: _Basis) -> Kinetics:
    """Fit with contact times brought to ``temperature`` by the declared activation energy."""
    tau = np.array([point.residence_time_s for point in points])
    beds = np.array([point.bed_degC if math.isfinite(point.bed_degC) else temperature for point in points])
    speeds = basis.between_beads * _speed(beds, temperature, basis.activation_kJ_mol)
    conversions = [point.conversion for point in points]
    found = fit_rate_constant(basis.law, list(tau * speeds), conversions, feeds, basis.constant)
    common = sorted(feeds, key=lambda feed: feed.reactant)[len(feeds) // 2]
    order = np.argsort(tau)
    times = np.linspace(0.0, 1.12 * float(tau.max()), CURVE_POINTS)
    own = _between(times, tau[order], speeds[order])

    def drawn(factors: NDArray[np.float64]) -> tuple[tuple[float, float], ...]:
        dose = times * factors
        return tuple(
            (float(t), conversion(basis.law, found.k, float(d), common, basis.constant))
            for t, d in zip(times, dose, strict=True)
        )

    differs = bool(np.abs(speeds / basis.between_beads - 1.0).max() > EVEN)
    even = drawn(np.full_like(times, basis.between_beads)) if differs else ()
    energy = basis.activation_kJ_mol if differs else 0.0
    return Kinetics(temperature, found, common, tuple(point.id for point in points), drawn(own), even, energy)


def _between(times: NDArray[np.float64], tau: NDArray[np.float64], speeds: NDArray[np.float64]) -> NDArray[np.float64]:
    """Speeds at other times: smooth and without overshoot between the points, the end points' own beyond them."""
    from scipy.interpolate import PchipInterpolator

    known, place = np.unique(tau, return_inverse=True)
    if known.size < 2:
        return np.full_like(times, speeds.mean())
    means = np.bincount(place, speeds) / np.bincount(place)
    within: NDArray[np.float64] = PchipInterpolator(known, means)(np.clip(times, known[0], known[-1]))
    return within


def _speed(beds_degC: NDArray[np.float64], at_degC: float, activation_kJ_mol: float) -> NDArray[np.float64]:
    """k at the bed's temperature over k at ``at_degC`` (Arrhenius)."""
    inverse = 1.0 / (beds_degC + KELVIN) - 1.0 / (at_degC + KELVIN)
    ratio: NDArray[np.float64] = np.exp(-1000.0 * activation_kJ_mol / GAS_CONSTANT * inverse)
    return ratio
