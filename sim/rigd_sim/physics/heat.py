"""Heat in closed form. SI."""

from __future__ import annotations

import math

LAMINAR_NUSSELT = 3.66
"""Round tube, constant wall temperature, developed; 4.364 for constant flux (48/11)."""


def jacketed_outlet(inlet: float, jacket: float, transfer_units: float) -> float:
    """T(L) of a plug: Tj + (T0 - Tj) exp(-NTU), NTU = UA/(m cp)."""
    return jacket + (inlet - jacket) * math.exp(-transfer_units)


def laminar_coefficient(conductivity: float, diameter: float) -> float:
    """h = 3.66 k / d [W/(m2 K)]."""
    return LAMINAR_NUSSELT * conductivity / diameter


def adiabatic_rise(heat_J_mol: float, concentration_mol_m3: float, density: float, heat_capacity: float) -> float:
    """dT = (-dH) c X / (rho cp) at full conversion [K]; ``heat_J_mol`` negative when heat is set free."""
    return -heat_J_mol * concentration_mol_m3 / (density * heat_capacity)


def lag_under_ramp(rate_K_s: float, time_constant_s: float) -> float:
    """How far a first-order body stays behind a steady ramp [K]."""
    return rate_K_s * time_constant_s
