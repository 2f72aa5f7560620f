"""Control's half of the run permission: tickets to the guard, and the guard's end as the pipe tells it."""

from __future__ import annotations

import asyncio
import contextlib
import os
from collections.abc import Callable

from rigd.model.ticket import Ticket, mark

TICKET_NS = 100_000_000
"""At most ten tickets a wall second, however often a scan happens."""


class Permission:
    """Collects the proof of each scan and offers tickets. Without a pipe (tests, no guard) it does the sums only."""

    def __init__(self, ticket_fd: int, wall_ns: Callable[[], int]) -> None:
        self._fd, self._wall_ns = ticket_fd, wall_ns
        self._proof = 0
        self._last_ns = 0
        if ticket_fd >= 0:
            os.set_blocking(ticket_fd, False)

    def done(self, scan: int, stage: str) -> None:
        """A stage of a scan is done."""
        self._proof = mark(self._proof, scan, stage)

    def offer(self, scan: int) -> None:
        """Send a ticket for this scan unless the last one is younger than ``TICKET_NS``; never waits."""
        now_ns = self._wall_ns()
        if now_ns - self._last_ns >= TICKET_NS:
            self._last_ns = now_ns
            self._write(Ticket(scan, now_ns, self._proof).line())

    def say_end(self, exit_code: int, sentence: str) -> None:
        """Tell the guard that this is an orderly end: the rig is stopped, nothing needs to be taken over."""
        self._write(f"D {exit_code} {' '.join(sentence.split())}\n".encode())

    def _write(self, line: bytes) -> None:
        if self._fd >= 0:
            with contextlib.suppress(OSError):  # a guard that is gone is noticed at the other pipe
                os.write(self._fd, line)


def watch_life(life_fd: int, lost: Callable[[], None]) -> None:
    """Call ``lost`` once when the other end of the pipe is gone, which means that the guard is."""
    if life_fd < 0:
        return
    loop = asyncio.get_running_loop()

    def readable() -> None:
        loop.remove_reader(life_fd)
        lost()

    loop.add_reader(life_fd, readable)
