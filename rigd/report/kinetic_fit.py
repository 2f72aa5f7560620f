"""The rate constant behind the points of a run, per temperature, with the curve to draw."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from rigd.analysis.fitting import FitError
from rigd.analysis.kinetics import Feed, Law, RateFit, conversion, feed_after_tee, fit_rate_constant, law_of
from rigd.model.recipe import PointKind
from rigd.model.rig import LiquidRole, RigDefinition
from rigd.report.data import PointRow, RunData

CURVE_POINTS = 120


@dataclass(frozen=True, slots=True)
class Kinetics:
    """One fit: at which temperature, from which points, and the fitted curve as (residence time [s], conversion)."""

    temperature_degC: float
    fit: RateFit
    feed: Feed
    used: tuple[str, ...]
    curve: tuple[tuple[float, float], ...]


@dataclass(frozen=True, slots=True)
class KineticsResult:
    """The fits, and in words what could not be fitted."""

    fits: tuple[Kinetics, ...]
    remarks: tuple[str, ...]


def kinetics_of(run: RunData) -> KineticsResult:
    """Fit each temperature that has two usable points. A point counts when it was settled and its conversion was read;
    returns to an earlier point count too (they carry the loss of activity into the scatter)."""
    law, partner, constant = law_of(run.rig.chemistry) if run.rig else (Law.APPARENT, "", 0.0)
    usable = [point for point in run.points if _usable(point)]
    fits: list[Kinetics] = []
    remarks: list[str] = []
    for temperature in sorted({round(point.temperature_degC, 1) for point in usable}):
        here = [point for point in usable if round(point.temperature_degC, 1) == temperature]
        try:
            feeds = [_feed(run.rig, point, partner) for point in here]
            fits.append(_fit(temperature, here, feeds, law, constant))
        except FitError as error:
            remarks.append(f"No rate constant at {temperature:g} degC: {error}.")
    left_out = [point.id for point in run.points if point.kind != PointKind.BLANK and not _usable(point)]
    if left_out:
        remarks.append(f"Not in the fit (not settled, or no conversion read): {', '.join(left_out)}.")
    return KineticsResult(tuple(fits), tuple(remarks))


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


def _fit(temperature: float, points: list[PointRow], feeds: list[Feed], law: Law, constant: float) -> Kinetics:
    tau = [point.residence_time_s for point in points]
    found = fit_rate_constant(law, tau, [point.conversion for point in points], feeds, constant)
    common = sorted(feeds, key=lambda feed: feed.reactant)[len(feeds) // 2]
    times = np.linspace(0.0, 1.12 * max(tau), CURVE_POINTS)
    curve = tuple((float(t), conversion(law, found.k, float(t), common, constant)) for t in times)
    return Kinetics(temperature, found, common, tuple(point.id for point in points), curve)
