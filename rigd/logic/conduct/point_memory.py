"""What a point remembers between two steps."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.logic.conduct.conditioning import NEVER_NS
from rigd.logic.conduct.means import Means
from rigd.logic.settling import Settler


@dataclass(frozen=True, slots=True)
class Memory:
    """``step``: set, settle, divert, collect, back. ``marks``: counters since when volumes count. ``entered_mL``:
    counters when the present setting of flows began; ``topped``: pumps that hold enough or were filled since.

    ``first`` are those when they first counted (they start anew after a refill), ``at_divert`` and ``at_collect`` those
    when it was settled and when the fraction began. ``window`` holds the means of the blocks that the settling was
    judged by, ``means`` those of the present block and later of the whole steady stretch.
    """

    step: str = "set"
    started_ns: int = 0
    in_band_ns: int = NEVER_NS
    entered_mL: Mapping[str, float] = field(default_factory=dict)
    topped: frozenset[str] = frozenset()
    marks: Mapping[str, float] | None = None
    first: Mapping[str, float] | None = None
    settle_ns: int = 0
    settler: Settler = field(default_factory=Settler)
    judged: bool = False
    settled: bool = False
    settled_ns: int = 0
    at_divert: Mapping[str, float] = field(default_factory=dict)
    at_collect: Mapping[str, float] = field(default_factory=dict)
    turned_ns: int = 0
    collect_ns: int = 0
    end_ns: int = 0
    collected_mL: float = 0.0
    means: Means = field(default_factory=Means)
    window: tuple[Means, ...] = ()
    residence_s: float = math.nan
