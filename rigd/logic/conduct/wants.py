"""Values that phases exchange with the rest of conduct: what they see, what they want, what they return."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Generic, TypeVar

from rigd.logic.conduct.campaign import PhaseSpec
from rigd.logic.conduct.layout import Layout
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.estimators import FlowHistory, residences_s
from rigd.logic.view import View
from rigd.model.events import Event, EventKind
from rigd.model.recipe import PointKind


@dataclass(frozen=True, slots=True)
class Want:
    """What a phase wants of one pump: to deliver ``label`` at a flow.

    ``need_mL``: still wanted of this liquid before the next planned change; fills are never larger, so that little is
    left to run out then. ``level_mL``: wanted ready at hand; below it the pump fills (a single one stops for it).
    ``batch_mL`` bounds one fill. ``urgent``: change over at once instead of running out. ``swap``: change to a
    standby of the same liquid, once it needs no filling.
    """

    label: str
    flow_mL_min: float = 0.0
    need_mL: float = 0.0
    level_mL: float = 0.0
    batch_mL: float = float("inf")
    may_fill: bool = True
    urgent: bool = False
    swap: bool = False


@dataclass(frozen=True, slots=True)
class Wants:
    """What a phase wants of the rig. ``together``: all pumps pause while one of them waits for liquid."""

    pumps: Mapping[str, Want] = field(default_factory=dict)
    outlet: str = ""
    temperature_degC: float | None = None
    circulate: bool = True
    together: bool = False


@dataclass(frozen=True, slots=True)
class Prompt:
    """Something a person must do or know. ``status`` is open, confirmed or withdrawn; ``since_ns`` when it was asked
    for the turn of a valve."""

    id: str
    text: str
    status: str = "open"
    who: str = ""
    since_ns: int = 0


@dataclass(frozen=True, slots=True)
class PointResult:
    """What became of a point. ``conversion`` is ``nan`` when it was not measured; times are monotonic ns, 0 = never.

    ``residence_time_s`` is the time that the liquid seen at the signal spent in the columns (liquid inside beads
    included), from integrated flow. ``values`` are means over the steady stretch, with ``<tag>.n`` counts.
    ``status``: collected, unsettled (collected without proof), abandoned, interrupted.
    """

    id: str
    kind: PointKind
    flows_mL_min: Mapping[str, float]
    temperature_degC: float
    residence_time_s: float
    settled: bool
    settle_s: float
    conversion: float
    values: Mapping[str, float]
    collected_mL: float
    collect_start_ns: int
    collect_end_ns: int
    status: str


@dataclass(frozen=True, slots=True)
class Scene:
    """What a phase sees. ``following_mL``: per pump, what each phase after this one draws of the same liquid.

    ``soiled_mL``: solvent that must still pass before the bed holds nothing else.
    """

    layout: Layout
    view: View
    spec: PhaseSpec
    tracks: Mapping[str, PumpTrack]
    prompts: Mapping[str, Prompt]
    following_mL: Mapping[str, tuple[tuple[float, float], ...]]
    positions: Mapping[str, str]
    histories: tuple[FlowHistory, ...]
    soiled_mL: float

    @property
    def clean(self) -> bool:
        """True when only solvent is in the bed."""
        return self.soiled_mL <= 0.0

    @property
    def now_ns(self) -> int:
        """Time of this scan."""
        return self.view.now_ns

    def delivered_mL(self) -> dict[str, float]:
        """Counters of all pumps, carried forward to now."""
        return {name: track.delivered_at(self.now_ns) for name, track in self.tracks.items()}

    def since_mL(self, marks: Mapping[str, float]) -> dict[str, float]:
        """Delivered by each pump since ``marks``."""
        return {name: max(0.0, mL - marks.get(name, mL)) for name, mL in self.delivered_mL().items()}

    def jacket_off_K(self, wanted_degC: float) -> float | None:
        """Distance of the jacket from a temperature; 0 without a jacket, ``None`` while it is not known."""
        if not self.layout.jacket:
            return 0.0
        value = self.view.value(self.layout.jacket)
        return None if value is None else abs(value - wanted_degC)

    def later_mL(self, name: str, here_mL: float, flow_mL_min: float) -> float:
        """What one filling should hold for the phases after this one besides ``here_mL``: whole phases only.

        So a syringe is used up where one point ends and the next begins, a change-over falls into the early settling,
        and the standby syringe is empty, free for a flush, for most of the time.
        """
        play = self.layout.pumps[name]
        room_mL = play.pump.stroke_mL - play.reserve_mL(flow_mL_min) - here_mL
        before_mL = found_mL = 0.0
        for volume_mL, ready_mL in self.following_mL.get(name, ()):
            if before_mL + ready_mL > room_mL:
                break
            found_mL = before_mL + ready_mL
            before_mL += volume_mL
        return found_mL

    def residence_s(self) -> float:
        """Time that the liquid now at the signal spent in the columns, from integrated flow; ``nan`` if not known."""
        path, part = self.layout.path, self.layout.signal_part
        found = residences_s(path, self.histories, part, self.now_ns) if part else None
        if found is None:
            return math.nan
        columns = [segment.id for segment in path.trunk if segment.kind == "column" and segment.id in found]
        return sum(found[name] for name in columns or found)

    def outlet_at(self, position: str) -> bool:
        """True when the outlet valve is confirmed there (or there is none)."""
        valve = self.layout.path.outlet_valve
        return not valve or self.positions.get(valve) == position

    def confirmed(self, prompt: str) -> bool:
        """True when a person has answered a prompt."""
        found = self.prompts.get(prompt)
        return found is not None and found.status == "confirmed"


M = TypeVar("M")


@dataclass(frozen=True, slots=True)
class Move(Generic[M]):
    """What a phase returns: its new memory, its wants, and what else is to be known.

    ``trouble`` asks for a hold and is its reason. ``prompt`` is opened unless it is already. ``due_ns`` is when the
    phase wants to be asked again at the latest; ``left_s`` its own estimate of the time left, if it has one. ``calm``:
    nothing can happen that ``due_ns`` or a new value of the settling signal would not tell.
    """

    memory: M
    wants: Wants
    step: str = ""
    events: tuple[Event, ...] = ()
    done: bool = False
    trouble: str = ""
    prompt: Prompt | None = None
    result: PointResult | None = None
    due_ns: int | None = None
    left_s: float | None = None
    calm: bool = False


def event(kind: EventKind, subject: str, t_ns: int, text: str, /, **fields: str | float | int | bool) -> Event:
    """Shorthand for an event."""
    return Event(kind, subject, t_ns, text, fields)
