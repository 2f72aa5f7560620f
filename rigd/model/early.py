"""From when on the early rules warn; what they watch is found from the rig's parts (``rigd.logic.early``)."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class EarlyLimits:
    """Changes against what was learned, as parts of it, times [s] and a temperature difference [K].

    ``time_left_s``: a trip nearer than this wakes a person. ``compliance`` 1 means twice what is stated,
    ``stiffer`` 0.3 a path that takes 30 % less per bar. All are own proposals (a clog at 1.5 times the reference is
    common practice).
    """

    resistance_up: float = 0.4
    resistance_down: float = 0.3
    time_left_s: float = 1800.0
    compliance: float = 1.0
    stiffer: float = 0.3
    balance: float = 0.15
    heat_K: float = 2.0
