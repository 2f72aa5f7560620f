"""How much a cold entry of the bed lowers the rate constant: an estimate for the report, never applied to a result.

Liquid comes in at room temperature and warms up along the bed, while its temperature is read at one place. In plug flow
with an even exchange with the jacket (no conduction along the bed),

    T(z) = T_jacket - (T_jacket - T_room) exp(-N z),   N = U / (rho cp Q),

which is the plain heat balance of a tube with a wall of even temperature. N of the fastest point follows from the bed's
own sensor; the others scale with 1/Q.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from rigd.report.data import PointRow

ROOM_DEGC = 22.0
"""Taken for the liquid that enters; a rig file does not state it."""
LEAST_GAP_K = 0.5
"""A bed sensor nearer to the jacket than this does not tell how the bed warms up."""
STEPS = 400
KELVIN, GAS_CONSTANT = 273.15, 8.314462618
"""CODATA 2018, exact."""


def cold_entry(
    points: Sequence[PointRow], jacket_degC: float, activation_kJ_mol: float, place: float = 0.5
) -> tuple[float, float] | None:
    """Mean of k along the bed over k at the sensor's temperature, as (lowest, highest) of the points.

    ``place`` is where the sensor sits, as a part of the bed's length. ``None`` when the jacket is not warmer than the
    room, when there is no activation energy, or when no point's bed is visibly colder than the jacket.
    """
    seen = [(point.total_mL_min, point.bed_degC) for point in points if math.isfinite(point.bed_degC)]
    step_K = jacket_degC - ROOM_DEGC
    if not seen or step_K <= LEAST_GAP_K or activation_kJ_mol <= 0:
        return None
    fastest, bed_degC = max(seen)
    gap_K = jacket_degC - bed_degC
    if not LEAST_GAP_K <= gap_K < step_K:
        return None
    units = math.log(step_K / gap_K) / place
    z = (np.arange(STEPS) + 0.5) / STEPS
    shares = []
    for flow, _ in seen:
        warmed = jacket_degC - step_K * np.exp(-units * fastest / flow * z)
        at_sensor = jacket_degC - step_K * math.exp(-units * fastest / flow * place)
        shares.append(float(_k(warmed, activation_kJ_mol).mean() / _k(np.array([at_sensor]), activation_kJ_mol)[0]))
    return min(shares), max(shares)


def _k(temperature_degC: NDArray[np.float64], activation_kJ_mol: float) -> NDArray[np.float64]:
    """k up to a constant factor (Arrhenius)."""
    k: NDArray[np.float64] = np.exp(-1000.0 * activation_kJ_mol / (GAS_CONSTANT * (temperature_degC + KELVIN)))
    return k
