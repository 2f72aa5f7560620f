"""Time as the shells see it. The core never asks: time is an argument there."""

from __future__ import annotations

from typing import Protocol


class Clock(Protocol):
    """A monotonic clock that may run faster than the wall (``pace``) or be virtual."""

    @property
    def pace(self) -> float:
        """Process seconds per wall second; 1 on a real rig."""

    def now_ns(self) -> int:
        """Monotonic process time [ns]; never falls."""

    def utc(self) -> str:
        """Wall time for people, ISO 8601 with offset; an annotation, never used in arithmetic."""

    async def sleep_until(self, t_ns: int) -> None:
        """Return at or after ``t_ns`` of process time; at once when it is past."""
