"""Process time for the live shell: monotonic, from zero, possibly faster than the wall."""

from __future__ import annotations

import asyncio
import time
from datetime import UTC, datetime
from fractions import Fraction

NS = 1_000_000_000


class PacedClock:
    """Counts from zero at its making; ``pace`` process seconds pass per wall second.

    Built on CLOCK_MONOTONIC, which stands still while the computer is suspended (``suspended_ns`` tells).
    """

    def __init__(self, pace: float = 1.0) -> None:
        exact = Fraction(pace).limit_denominator(1000)
        if exact <= 0:
            raise ValueError(f"pace must be above zero, not {pace}")
        self._up, self._down = exact.numerator, exact.denominator
        self.origin_ns = time.monotonic_ns()

    @property
    def pace(self) -> float:
        """Process seconds per wall second."""
        return self._up / self._down

    def now_ns(self) -> int:
        """Process time [ns]; never falls."""
        return (time.monotonic_ns() - self.origin_ns) * self._up // self._down

    def utc(self) -> str:
        """Wall time, ISO 8601 with offset; for people only."""
        return datetime.now(UTC).isoformat(timespec="milliseconds")

    async def sleep_until(self, t_ns: int) -> None:
        """Return at or after ``t_ns`` of process time."""
        while (left_ns := t_ns - self.now_ns()) > 0:  # noqa: ASYNC110 - sleep may return early
            await asyncio.sleep(left_ns / self.pace / NS)


def wall_ns() -> int:
    """The system's monotonic clock [ns]: for deadlines that no pace changes."""
    return time.monotonic_ns()


def suspended_ns() -> int:
    """How long this computer was suspended since it booted [ns]; only differences mean something.

    CLOCK_BOOTTIME goes on during a suspend, CLOCK_MONOTONIC does not (PEP 418). 0 where there is no such clock.
    """
    boot = getattr(time, "CLOCK_BOOTTIME", None)
    if boot is None:
        return 0
    return time.clock_gettime_ns(boot) - time.clock_gettime_ns(time.CLOCK_MONOTONIC)


def boot_id() -> str:
    """The kernel's random name for this boot, "" where it has none."""
    try:
        with open("/proc/sys/kernel/random/boot_id", encoding="ascii") as file:
            return file.read().strip()
    except OSError:
        return ""
