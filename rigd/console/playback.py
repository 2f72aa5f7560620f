"""The deck of ``rigd replay --watch``: where in the run, how fast, and what each key does. Pure; the terminal is
elsewhere.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

SPEEDS = (0.1, 0.25, 0.5, 1.0, 2.0, 5.0, 10.0, 25.0, 60.0, 150.0, 600.0, 3600.0)
JUMP_NS = 30_000_000_000
LONG_JUMP_NS = 600_000_000_000

HELP = "space play/pause  , . one scan  ← → 30 s  ↓ ↑ 10 min  [ ] phase or trip  - + speed  0-9 tenths  q leave"


@dataclass(frozen=True, slots=True)
class Deck:
    """``position_ns`` lies between ``start_ns`` and ``end_ns``; ``step`` is a number of scans that is still to be gone,
    after which the position is that of the scan. ``speed`` is process seconds per second."""

    start_ns: int
    end_ns: int
    chapters_ns: Sequence[int] = ()
    position_ns: int = 0
    speed: float = 10.0
    playing: bool = True
    step: int = 0
    left: bool = False

    def moved(self, to_ns: int) -> Deck:
        """At another time, kept within the run."""
        return replace(self, position_ns=min(max(to_ns, self.start_ns), self.end_ns), step=0)

    def passed(self, wall_s: float) -> Deck:
        """After some time on the wall; stops by itself at the end."""
        if not self.playing:
            return self
        deck = self.moved(self.position_ns + round(wall_s * self.speed * 1e9))
        return replace(deck, playing=deck.position_ns < self.end_ns)

    def shown(self, position_ns: int) -> Deck:
        """After the scan at ``position_ns`` was shown as asked by ``step``."""
        return replace(self, position_ns=position_ns, step=0)

    def pressed(self, key: str) -> Deck:
        """After a key: a character, or the name of an arrow (``left``, ``right``, ``up``, ``down``)."""
        if key in _JUMPS_NS:
            return self.moved(self.position_ns + _JUMPS_NS[key])
        if key in _STEPS:
            return replace(self, playing=False, step=_STEPS[key])
        if key in _SPEED_STEPS:
            return replace(self, speed=_next_speed(self.speed, _SPEED_STEPS[key]))
        if key.isdigit() and key.isascii() and len(key) == 1:
            return self.moved(self.start_ns + (self.end_ns - self.start_ns) * int(key) // 10)
        if key in ("[", "]"):
            return self.moved(self._chapter(forwards=key == "]"))
        if key == " ":
            at_end = self.position_ns >= self.end_ns
            deck = self.moved(self.start_ns) if at_end and not self.playing else self
            return replace(deck, playing=not self.playing)
        return replace(self, left=self.left or key in ("q", "Q"))

    def _chapter(self, *, forwards: bool) -> int:
        if forwards:
            return next((t_ns for t_ns in self.chapters_ns if t_ns > self.position_ns), self.end_ns)
        return next((t_ns for t_ns in reversed(self.chapters_ns) if t_ns < self.position_ns), self.start_ns)


_JUMPS_NS = {"left": -JUMP_NS, "right": JUMP_NS, "down": -LONG_JUMP_NS, "up": LONG_JUMP_NS}
_STEPS = {",": -1, ".": 1}
_SPEED_STEPS = {"-": -1, "+": 1, "=": 1}


def _next_speed(speed: float, step: int) -> float:
    if step > 0:
        return next((one for one in SPEEDS if one > speed), SPEEDS[-1])
    return next((one for one in reversed(SPEEDS) if one < speed), SPEEDS[0])
