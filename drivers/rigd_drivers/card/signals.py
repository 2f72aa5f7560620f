"""Standard signals of transmitters and probes: 4-20 mA, Pt100, thermocouples K and T. Pure.

Sources: NAMUR NE 43 (limits as several public summaries give them); IEC 60751:2022; IEC 60584-1:2013 with the ITS-90
reference functions of NIST SRD 60. Reference junction at 0 degC; add the voltage of the terminals' temperature first.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from enum import StrEnum

A, B, C = 3.9083e-3, -5.775e-7, -4.183e-12
K_ABOVE = (
    -1.7600413686e-2, 3.8921204975e-2, 1.8558770032e-5, -9.9457592874e-8, 3.1840945719e-10, -5.6072844889e-13,
    5.6075059059e-16, -3.2020720003e-19, 9.7151147152e-23, -1.2104721275e-26,
)  # fmt: skip
K_BELOW = (
    0.0, 3.9450128025e-2, 2.3622373598e-5, -3.2858906784e-7, -4.9904828777e-9, -6.7509059173e-11, -5.7410327428e-13,
    -3.1088872894e-15, -1.0451609365e-17, -1.9889266878e-20, -1.6322697486e-23,
)  # fmt: skip
T_ABOVE = (
    0.0, 3.8748106364e-2, 3.3292227880e-5, 2.0618243404e-7, -2.1882256846e-9, 1.0996880928e-11, -3.0815758772e-14,
    4.5479135290e-17, -2.7512901673e-20,
)  # fmt: skip
T_BELOW = (
    0.0, 3.8748106364e-2, 4.4194434347e-5, 1.1844323105e-7, 2.0032973554e-8, 9.0138019559e-10, 2.2651156593e-11,
    3.6071154205e-13, 3.8493939883e-15, 2.8213521925e-17, 1.4251594779e-19, 4.8768662286e-22, 1.0795539270e-24,
    1.3945027062e-27, 7.9795153927e-31,
)  # fmt: skip

FAILED_LOW_MA, FAILED_HIGH_MA = 3.6, 21.0
GOOD_LOW_MA, GOOD_HIGH_MA = 3.8, 20.5


class Health(StrEnum):
    """Status signals of NAMUR NE 107 that a bare current can tell."""

    GOOD = "good"
    OUT_OF_SPECIFICATION = "out of specification"
    FAILURE = "failure"


def current_health(current_mA: float) -> Health:
    """Band of NE 43; what is not a number is a failure."""
    if not FAILED_LOW_MA < current_mA < FAILED_HIGH_MA:
        return Health.FAILURE
    return Health.GOOD if GOOD_LOW_MA <= current_mA <= GOOD_HIGH_MA else Health.OUT_OF_SPECIFICATION


def from_current(current_mA: float, low: float, high: float) -> float:
    """The measured value of a linear transmitter whose span is ``low`` at 4 mA to ``high`` at 20 mA."""
    return low + (current_mA - 4.0) / 16.0 * (high - low)


def pt100_ohm(t_degC: float) -> float:
    """Resistance at a temperature, -200 to 850 degC (Callendar and Van Dusen)."""
    below = C * (t_degC - 100.0) * t_degC**3 if t_degC < 0 else 0.0
    return 100.0 * (1.0 + A * t_degC + B * t_degC * t_degC + below)


def thermocouple_mV(kind: str, t_degC: float) -> float:
    """Voltage of type K (-200 to 1372 degC) or T (-200 to 400 degC)."""
    if kind == "T":
        return _polynomial(T_ABOVE if t_degC >= 0 else T_BELOW, t_degC)
    if t_degC < 0:
        return _polynomial(K_BELOW, t_degC)
    return _polynomial(K_ABOVE, t_degC) + 0.1185976 * math.exp(-1.183432e-4 * (t_degC - 126.9686) ** 2)


def pt100_degC(ohm: float) -> float:
    """Temperature from a resistance; not a number outside -200 to 850 degC (also for an open or shorted element)."""
    return _invert(pt100_ohm, ohm, -200.02, 850.02)


def thermocouple_degC(kind: str, voltage_mV: float) -> float:
    """Temperature from a compensated voltage; not a number outside the range of ``thermocouple_mV``."""
    return _invert(lambda t: thermocouple_mV(kind, t), voltage_mV, -200.02, 400.02 if kind == "T" else 1372.02)


def _polynomial(coefficients: tuple[float, ...], t: float) -> float:
    total = 0.0
    for value in reversed(coefficients):
        total = total * t + value
    return total


def _invert(function: Callable[[float], float], wanted: float, low: float, high: float) -> float:
    if not function(low) <= wanted <= function(high):
        return math.nan
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if function(middle) < wanted else (low, middle)
    return (low + high) / 2
