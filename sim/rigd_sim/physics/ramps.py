"""Residence time of a plug under changing flow: exact mapping by volume.

A sample leaves at te and entered at ti when integral_{ti}^{te} Q dt = V; tau = te - ti. Differential check: d tau/d te
= 1 - Q(te)/Q(ti). J. S. Moore, K. F. Jensen, Angew. Chem. Int. Ed. 53 (2014) 470-473 for the linear ramp of
residence time.
"""

from __future__ import annotations

import math
from collections.abc import Callable


def linear_flow_residence(q0: float, slope: float, volume: float, te: float) -> float:
    """tau for Q = q0 before t = 0 and q0 + slope t after."""
    passed = q0 * te + slope * te**2 / 2.0
    before = passed - volume  # volume that had entered by ti
    if before <= 0.0:
        return te - before / q0
    root = math.sqrt(q0**2 + 2.0 * slope * before)
    return te - 2.0 * before / (q0 + root)


def linear_flow_exit(q0: float, slope: float, dead: float, tm: float) -> float:
    """When a sample that is seen at ``tm`` behind the dead volume left the reactor."""
    return tm - linear_flow_residence(q0, slope, dead, tm)


def step_residence(before: float, after: float, volume: float, te: float) -> float:
    """tau at ``te`` after a step of the flow at 0."""
    entered = after * te - volume  # volume that had passed when the sample entered, counted from the step
    return te - entered / (before if entered < 0.0 else after)


def dose(rate_constant: Callable[[float], float], ti: float, te: float, steps: int = 200) -> float:
    """Da = integral of k(t) dt from entry to exit (Simpson's rule)."""
    h = (te - ti) / steps
    inner = sum((4.0 if i % 2 else 2.0) * rate_constant(ti + i * h) for i in range(1, steps))
    return h / 3.0 * (rate_constant(ti) + inner + rate_constant(te))


def linear_tau_slope(alpha: float) -> float:
    """For Q = V/(tau0 + alpha t) the true residence time rises with slope 1 - e^-alpha."""
    return -math.expm1(-alpha)
