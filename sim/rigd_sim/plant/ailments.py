"""Faults that are in force: a schedule of effects on the levers. What kinds there are is not known here."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.model.rig import RigDefinition
from rigd.ports.plant import FaultKind, FaultSpec
from rigd_sim.plant.layout import Layout
from rigd_sim.plant.levers import Levers


@dataclass(frozen=True, slots=True)
class Situation:
    """What an effect may look at: the rig, its network, the fault and the seconds since its onset."""

    rig: RigDefinition
    layout: Layout
    fault: FaultSpec
    elapsed_s: float


@dataclass(frozen=True, slots=True)
class FaultEffect:
    """A kind of fault: the targets that it may have in a rig and what it does to the levers while it lasts."""

    kind: FaultKind
    targets: Callable[[RigDefinition], Sequence[str]]
    apply: Callable[[Levers, Situation], None]


@dataclass(slots=True)
class _Entry:
    spec: FaultSpec
    onset_s: float
    end_s: float


class Ailments:
    """All injected faults; builds the levers that are right for a moment."""

    def __init__(self, rig: RigDefinition, layout: Layout, effects: Mapping[str, FaultEffect]) -> None:
        self._rig, self._layout, self._effects = rig, layout, effects
        self._entries: list[_Entry] = []

    def inject(self, fault: FaultSpec, now_s: float) -> None:
        """Add a fault; one whose onset is past begins now. ``ConfigError`` names what is allowed."""
        effect = self._effects.get(fault.kind)
        if effect is None:
            raise _refuse("fault-kind", f"there is no fault kind {fault.kind!r}", self._effects)
        allowed = effect.targets(self._rig)
        if fault.target not in allowed:
            raise _refuse("fault-target", f"{fault.kind!r} cannot hit {fault.target!r}", allowed)
        onset_s = max(fault.onset_s, now_s)
        self._entries.append(_Entry(fault, onset_s, onset_s + fault.duration_s))

    def clear(self, kind: str, target: str) -> None:
        """Forget all faults of this kind on this target."""
        self._entries = [e for e in self._entries if (e.spec.kind, e.spec.target) != (kind, target)]

    def any(self) -> bool:
        """True when a fault was ever injected and not cleared."""
        return bool(self._entries)

    def next_change(self, now_s: float) -> float:
        """Seconds until a fault begins or ends; infinity if none will."""
        times = [t - now_s for e in self._entries for t in (e.onset_s, e.end_s)]
        return min((t for t in times if t > 1e-9), default=float("inf"))

    def active(self, now_s: float) -> bool:
        """True while any fault is in force."""
        return any(e.onset_s <= now_s + 1e-9 < e.end_s for e in self._entries)

    def levers(self, now_s: float) -> Levers:
        """Levers of this moment: healthy, then every active effect in the order of injection."""
        result = Levers()
        for entry in self._entries:
            elapsed = now_s - entry.onset_s
            if elapsed >= -1e-9 and now_s + 1e-9 < entry.end_s:
                situation = Situation(self._rig, self._layout, entry.spec, max(elapsed, 0.0))
                self._effects[entry.spec.kind].apply(result, situation)
        return result


def _refuse(code: str, message: str, allowed: Mapping[str, object] | Sequence[str]) -> ConfigError:
    names = ", ".join(sorted(allowed)) or "nothing in this rig"
    return ConfigError((Problem(code, message, f"allowed: {names}"),))
