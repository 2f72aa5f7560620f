"""Everything that the sequence remembers between two scans."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from rigd.logic.conduct import run_states
from rigd.logic.conduct.campaign import PhaseKind, PhaseSpec
from rigd.logic.conduct.fronts import Fronts
from rigd.logic.conduct.layout import Layout
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.conduct.wants import PointResult, Prompt
from rigd.logic.demand import Demand
from rigd.logic.estimators import FlowHistory
from rigd.logic.view import Verdict
from rigd.model.events import Event
from rigd.model.orders import Stop

if TYPE_CHECKING:
    from rigd.logic.planning import Plan

HOLD_SPEC = PhaseSpec(PhaseKind.HOLD, "hold", "Hold")


@dataclass(frozen=True, slots=True)
class ConductState:
    """The run. ``index`` is the place in the campaign; ``queue`` holds what a restart does before it goes on there.

    ``spec`` and ``memory`` are the phase at work (its own frozen state), ``since_ns`` when it began. ``stop`` is the
    stop that conduct has already followed. ``seen`` holds, per tag, the time of the newest sample that was used.
    ``due_ns`` is when it must think again if nothing happens; ``alert`` are tags whose new samples make it think.
    """

    layout: Layout
    plan: Plan
    campaign: tuple[PhaseSpec, ...]
    started_ns: int
    run: str = run_states.IDLE
    index: int = 0
    queue: tuple[PhaseSpec, ...] = ()
    spec: PhaseSpec = HOLD_SPEC
    memory: object = None
    since_ns: int = 0
    stage: str = ""
    step: str = ""
    left_s: float | None = None
    tracks: Mapping[str, PumpTrack] = field(default_factory=dict)
    prompts: Mapping[str, Prompt] = field(default_factory=dict)
    positions: Mapping[str, str] = field(default_factory=dict)
    last_positions: Mapping[str, str] = field(default_factory=dict)
    by_hand: Mapping[str, str] = field(default_factory=dict)
    histories: tuple[FlowHistory, ...] = ()
    fronts: Fronts = field(default_factory=Fronts)
    soiled_mL: float | None = None
    results: tuple[PointResult, ...] = ()
    following_mL: Mapping[str, tuple[tuple[float, float], ...]] = field(default_factory=dict)
    bath_degC: float | None = None
    circulate: bool = True
    hold_reason: str = ""
    called_off: bool = False
    demand: Demand | None = None
    verdict: Verdict = field(default_factory=Verdict)
    seen: Mapping[str, int] = field(default_factory=dict)
    alert: frozenset[str] = frozenset()
    due_ns: int = 0

    @property
    def stop(self) -> Stop:
        """The stop in force when conduct last thought."""
        return self.verdict.stop


@dataclass(frozen=True, slots=True)
class ConductStep:
    """What conduct returns: what it wants now (``None``: nothing, leave all as it is), and when it is to be asked."""

    state: ConductState
    demand: Demand | None
    events: tuple[Event, ...]
    wake_ns: int
