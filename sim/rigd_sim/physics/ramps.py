"""Residence time of a plug under changing flow: exact mapping by volume.

A sample leaves at te and entered at ti when integral_{ti}^{te} Q dt = V; tau = te - ti. Differential check: d tau/d te
= 1 - Q(te)/Q(ti). J. S. Moore, K. F. Jensen, Angew. Chem. Int. Ed. 53 (2014) 470-473 for the linear ramp of
residence time.
"""

from __future__ import annotations

import math


def linear_flow_residence(q0: float, slope: float, volume: float, te: float) -> float:
    """tau for Q = q0 before t = 0 and q0 + slope t after."""
    passed = q0 * te + slope * te**2 / 2.0
    before = passed - volume  # volume that had entered by ti
    if before <= 0.0:
        return te - before / q0
    root = math.sqrt(q0**2 + 2.0 * slope * before)
    return te - 2.0 * before / (q0 + root)


def linear_tau_slope(alpha: float) -> float:
    """For Q = V/(tau0 + alpha t) the true residence time rises with slope 1 - e^-alpha."""
    return -math.expm1(-alpha)
