"""Watches the true plant through a faulted night: what ran out, how hot it got, whose readings were untrue, whose flow.

What it found says how bad a fault is that nothing on the rig stopped. The tolerances are our own (common practice, no
source): wide enough that a healthy night, with its change-overs and lags, shows nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from itertools import chain

from rigd.logic.arbitration import Aspect
from rigd.logic.program import Program
from rigd.logic.scan import CoreState
from rigd.model.protection import ConditionKind
from rigd.model.rig import Tag, TagKind
from rigd.model.samples import Quality
from rigd.ports.plant import Plant

HARMLESS, SPOILS, DANGEROUS = "harmless", "spoils data", "dangerous"
SEVERITIES = (HARMLESS, SPOILS, DANGEROUS)

EVERY_NS = 5_000_000_000
LASTING_S = 60.0
"""A reading or a flow must be off for this long; change-overs and lags of sensors are shorter."""
SPILT_ML = 0.1
NEAR_RATING = 0.8
FLOW_OFF = 0.05
OFF = {"pressure": 0.3, "temperature": 2.0, "fraction": 0.03}
"""How far a reading may lie from the truth: bar, K, conversion (1)."""


@dataclass(slots=True)
class _Streak:
    """By how much something was off at least for ``LASTING_S`` without a break, the worst of all such times."""

    times: list[tuple[int, float]] = field(default_factory=list)
    lasting: float = 0.0

    def take(self, off: float | None, now_ns: int) -> None:
        if off is None or (self.times and off * self.times[-1][1] < 0.0):
            self.times.clear()
        if off is None:
            return
        self.times.append((now_ns, off))
        if now_ns - self.times[0][0] >= LASTING_S * 1e9:
            least = min((by for _, by in self.times), key=abs)
            self.lasting = max(self.lasting, least, key=abs)
            self.times.pop(0)


@dataclass(slots=True)
class Witness:
    """Of one night. ``begin`` when the fault comes; ``look`` with each state; ``findings`` at the end."""

    program: Program
    plant: Plant
    begun: bool = False
    _due_ns: int = 0
    _floor_mL: float = 0.0
    _spilt_mL: float = 0.0
    _over_K: dict[str, float] = field(default_factory=dict)
    _readings: dict[str, _Streak] = field(default_factory=dict)
    _flow: dict[str, _Streak] = field(default_factory=dict)

    def begin(self, now_ns: int) -> None:
        """The fault comes now."""
        self.begun, self._due_ns = True, now_ns
        self._floor_mL = self.plant.truth().get("volume:floor", 0.0)

    def look(self, now_ns: int, state: CoreState) -> None:
        """Compare what the daemon believes with what is."""
        if not self.begun or now_ns < self._due_ns:
            return
        self._due_ns = now_ns + EVERY_NS
        truth = self.plant.truth()
        self._spilt_mL = max(self._spilt_mL, truth.get("volume:floor", 0.0) - self._floor_mL)
        for column in self.program.rig.columns:
            limit = _hottest_degC(self.program, column.id)
            if limit is not None:
                over = truth.get(f"temperature:{column.id}.max", limit) - limit
                self._over_K[column.id] = max(self._over_K.get(column.id, over), over)
        for tag in self.program.rig.tags:
            self._compare(tag, truth.get(_true_key(tag)), state, now_ns)
        self._compare_flow(truth, state, now_ns)

    def _compare(self, tag: Tag, true: float | None, state: CoreState, now_ns: int) -> None:
        if true is None:
            return
        sample = state.protect.signals.samples.get(tag.id)
        believed = sample is not None and sample.quality is Quality.GOOD
        off = sample.value - true if sample is not None and believed else 0.0
        streak = self._readings.setdefault(tag.id, _Streak())
        streak.take(off if abs(off) > OFF[tag.measures] else None, now_ns)

    def _compare_flow(self, truth: Mapping[str, float], state: CoreState, now_ns: int) -> None:
        told = [state.memory.last(pump.id, Aspect.RATE) for pump in self.program.rig.pumps]
        ordered = sum(one.order.value for one in told if one is not None)
        for column in self.program.rig.columns:
            share = truth.get(f"flow:{column.id}", 0.0) / ordered - 1.0 if ordered > 0.0 else 0.0
            streak = self._flow.setdefault(column.id, _Streak())
            streak.take(share if abs(share) > FLOW_OFF else None, now_ns)

    def findings(self, part: str, share: float) -> tuple[str, str]:
        """Severity and the reasons for it. ``share`` of its rating is what ``part`` came to at most."""
        grave = [*self._outside(), *self._hot(), *self._blind()]
        if share > NEAR_RATING:
            grave.append(f"{part} came to {100 * share:.0f} % of its rating")
        if grave:
            return DANGEROUS, "; ".join(grave)
        spoilt = [*self._untrue(), *self._wrong_flow()]
        return (SPOILS, "; ".join(spoilt)) if spoilt else (HARMLESS, "")

    def _outside(self) -> list[str]:
        return [f"{self._spilt_mL:.2g} mL ran out onto the bench"] if self._spilt_mL > SPILT_ML else []

    def _hot(self) -> list[str]:
        return [
            f"{column} came {over:.1f} K over the limit of its trip"
            for column, over in self._over_K.items()
            if over > 0.0
        ]

    def _blind(self) -> list[str]:
        """A sensor that alone guards against something and reads too low to do so."""
        alone = {
            lock.causes[0].tag: lock.id
            for lock in self.program.rig.interlocks
            if len(lock.causes) == 1 and lock.causes[0].kind is ConditionKind.HIGH
        }
        return [
            f"{tag} reads {-streak.lasting:.1f} too low, and {alone[tag]} trusts it alone"
            for tag, streak in self._readings.items()
            if tag in alone and streak.lasting < 0.0
        ]

    def _untrue(self) -> list[str]:
        return [
            f"{tag} is untrue by {streak.lasting:+.2g}"
            for tag, streak in self._readings.items()
            if streak.lasting != 0.0
        ]

    def _wrong_flow(self) -> list[str]:
        return [
            f"the flow through {column} is {100 * streak.lasting:+.0f} % off what was ordered"
            for column, streak in self._flow.items()
            if streak.lasting != 0.0
        ]


def _true_key(tag: Tag) -> str:
    """The true value of what a tag shows; "" where the plant tells none."""
    part, _, place = tag.at.partition(".")
    if tag.measures not in OFF or tag.kind is TagKind.FEEDBACK:
        return ""
    if tag.measures == "fraction":
        return f"conversion:{part or tag.id.partition('.')[0]}" if tag.id.endswith(".conversion") else ""
    if tag.measures == "temperature" and place in ("inlet", "outlet"):
        return ""
    return f"{tag.measures}:{part}.jacket" if place == "jacket" else f"{tag.measures}:{part}"


def _hottest_degC(program: Program, column: str) -> float | None:
    """The lowest trip limit on a temperature in this column."""
    tags = {tag.id for tag in program.rig.tags if tag.measures == "temperature" and tag.at.partition(".")[0] == column}
    causes = chain.from_iterable(lock.causes for lock in program.rig.interlocks)
    return min(
        (cause.limit for cause in causes if cause.tag in tags and cause.kind is ConditionKind.HIGH), default=None
    )
