"""A run as the report sees it: plain values, whatever they were read from."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rigd.model.events import Event
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition

CHAIN_HEAD = "chain head"
"""Key of the head of the journal's chain of hashes among the facts of a run."""


@dataclass(frozen=True, slots=True, eq=False)
class Trace:
    """The samples of one tag: process time [s], value (NaN where it was bad), with title, unit and what it measures."""

    tag: str
    title: str
    measures: str
    unit: str
    t_s: NDArray[np.float64]
    value: NDArray[np.float64]

    @property
    def peak(self) -> float:
        """Largest good value; NaN without one."""
        good = self.value[np.isfinite(self.value)]
        return float(good.max()) if good.size else float("nan")

    def between(self, start_s: float, end_s: float) -> NDArray[np.float64]:
        """Good values with ``start_s <= t < end_s``."""
        inside = self.value[(self.t_s >= start_s) & (self.t_s < end_s)]
        return inside[np.isfinite(inside)]


@dataclass(frozen=True, slots=True)
class PhaseSpan:
    """A phase of the recipe from its start to the next one's; ``point`` is "" outside the sweep."""

    id: str
    label: str
    point: str
    start_s: float
    end_s: float


@dataclass(frozen=True, slots=True)
class PointRow:
    """What became of one point. Conversion is a fraction; ``conversion_sd`` the scatter of its readings;
    ``temperature_degC`` is the planned one, ``bed_degC`` the bed's own while the point was steady.

    NaN stands for what was not measured; times are process seconds since the start of the run.
    """

    id: str
    kind: str
    flows_mL_min: Mapping[str, float]
    temperature_degC: float
    residence_time_s: float
    status: str
    settled: bool
    settle_s: float
    conversion: float
    conversion_sd: float
    readings: int
    collected_mL: float
    collect_start_s: float
    collect_end_s: float
    selectivity: float = math.nan
    bed_degC: float = math.nan

    @property
    def cut_short(self) -> bool:
        """True when the run left the point before it could be judged steady or not."""
        return not self.settled and not math.isfinite(self.settle_s)

    @property
    def total_mL_min(self) -> float:
        """Sum of the flows."""
        return sum(self.flows_mL_min.values())


@dataclass(frozen=True, slots=True, eq=False)
class RunData:
    """Everything that a report is made of. ``rig`` and ``recipe`` are ``None`` when the journal's own files can no
    longer be read; the report then says so and leaves out what needs them. ``ages_ms``: how old the samples of a tag
    were when judged; ``walls``: UTC of the process times of alarms; ``alerts``: attempts to tell a person."""

    id: str
    folder: str
    title: str
    recipe_title: str
    simulated: bool
    pace: float
    outcome: str
    outcome_text: str
    started_utc: str
    ended_utc: str
    duration_s: float
    traces: Mapping[str, Trace]
    phases: tuple[PhaseSpan, ...]
    points: tuple[PointRow, ...]
    events: tuple[Event, ...]
    used_mL: Mapping[str, float]
    facts: Mapping[str, str] = field(default_factory=dict)
    ages_ms: Mapping[str, Mapping[int, int]] = field(default_factory=dict)
    walls: Mapping[int, str] = field(default_factory=dict)
    alerts: tuple[Mapping[str, str], ...] = ()
    rig: RigDefinition | None = None
    recipe: Recipe | None = None

    def measured(self, what: str) -> tuple[Trace, ...]:
        """Traces of sensors that measure this ("pressure", "temperature", "flow", "fraction"), in the rig's order."""
        return tuple(trace for trace in self.traces.values() if trace.measures == what and trace.t_s.size)
