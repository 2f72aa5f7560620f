"""The shell watches itself: scans that come late, a computer that slept, a journal that is not written, a lost
guard."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from rigd.ports.journal import Journal

NS = 1_000_000_000
PERIODS_LATE = 3
PACED_LATE_NS = NS // 2
"""A paced run may pause this long: the computer does not get faster with the process (decision 5)."""
SUSPEND_NS = NS // 2

Faults = tuple[tuple[str, str], ...]


@dataclass(slots=True)
class Vigil:
    """Asked once per scan for the shell's own faults, as (name, detail). Lateness is wall time between scans."""

    scan_ns: int
    pace: float
    journal: Journal
    wall_ns: Callable[[], int]
    suspended_ns: Callable[[], int]
    alerts: Callable[[], str] = lambda: ""
    guard_lost: bool = False
    _last_ns: int = 0
    _slept_ns: int | None = None

    def faults(self) -> Faults:
        """What is wrong now; lateness and sleep are told once, the others as long as they last."""
        found = [*self._late(), *self._slept()]
        if trouble := self.journal.trouble():
            found.append(("journal", trouble))
        if alone := self.alerts():
            found.append(("alerts", alone))
        if self.guard_lost:
            found.append(("guard", "the guard process is gone"))
        return tuple(found)

    def _late(self) -> Faults:
        now_ns, last_ns = self.wall_ns(), self._last_ns
        self._last_ns = now_ns
        limit_ns = PERIODS_LATE * self.scan_ns
        if self.pace != 1:
            limit_ns = max(limit_ns, PACED_LATE_NS)
        if not last_ns or now_ns - last_ns <= limit_ns:
            return ()
        return (
            ("scan", f"{(now_ns - last_ns) / 1e6:.0f} ms since the last scan, {limit_ns / 1e6:.0f} ms are allowed"),
        )

    def _slept(self) -> Faults:
        slept_ns, before_ns = self.suspended_ns(), self._slept_ns
        self._slept_ns = slept_ns
        if before_ns is None or slept_ns - before_ns <= SUSPEND_NS:
            return ()
        return (("suspend", f"the computer was suspended for {(slept_ns - before_ns) / 1e9:.1f} s"),)
