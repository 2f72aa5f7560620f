"""An event loop whose idle waits cost nothing: when all tasks wait, its clock jumps to the next timer.

For tests and the deep rehearsal. Timers with equal deadlines run in the order in which they were set (the stock loop's
heap does not promise that). A wait that nothing can end raises ``RuntimeError`` instead of hanging. While a thread owes
an answer (an executor job, or inside ``hold()``) the clock stands still and the loop waits really. Real descriptors are
polled, but nothing on this loop may expect the outside to keep up with its time.
"""

from __future__ import annotations

import asyncio
import heapq
import selectors
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta
from itertools import count
from typing import Any

EPOCH = datetime(2000, 1, 1, tzinfo=UTC)


class _Selector(selectors.BaseSelector):
    """Asks the real selector without waiting and moves the loop's clock instead."""

    def __init__(self) -> None:
        self.real = selectors.DefaultSelector()
        self.loop: VirtualLoop

    def select(self, timeout: float | None = None) -> list[tuple[selectors.SelectorKey, int]]:
        loop = self.loop
        if timeout is not None and timeout <= 0:
            return self.real.select(0)
        if loop.owed:
            return self.real.select(None)
        ready = self.real.select(0)
        if ready:
            return ready
        if timeout is None:
            if len(self.real.get_map()) <= 1:  # only the loop's own wake-up pipe
                raise RuntimeError("virtual-time deadlock: every task waits for something that cannot happen")
            return self.real.select(None)
        loop.jump()
        return []

    def register(self, fileobj: Any, events: int, data: Any = None) -> selectors.SelectorKey:
        return self.real.register(fileobj, events, data)

    def unregister(self, fileobj: Any) -> selectors.SelectorKey:
        return self.real.unregister(fileobj)

    def modify(self, fileobj: Any, events: int, data: Any = None) -> selectors.SelectorKey:
        return self.real.modify(fileobj, events, data)

    def get_map(self) -> Mapping[Any, selectors.SelectorKey]:
        return self.real.get_map()

    def close(self) -> None:
        self.real.close()


class _Timer(asyncio.TimerHandle):
    """A timer that keeps its place among those with the same deadline."""

    __slots__ = ("place",)
    place: int

    def __lt__(self, other: object) -> bool:
        if not isinstance(other, _Timer):
            return NotImplemented
        return (self.when(), self.place) < (other.when(), other.place)


class VirtualLoop(asyncio.SelectorEventLoop):
    """``asyncio.Runner(loop_factory=VirtualLoop)`` runs a coroutine in virtual time, which starts at 0 s."""

    def __init__(self) -> None:
        selector = _Selector()
        selector.loop = self
        self._now = 0.0
        self._places = count()
        self.owed = 0
        super().__init__(selector)
        self._clock_resolution = 1e-9

    def time(self) -> float:
        """Virtual seconds since the loop was made."""
        return self._now

    def jump(self) -> None:
        """Set the clock to the next timer."""
        scheduled: list[asyncio.TimerHandle] = self._scheduled  # type: ignore[attr-defined]
        self._now = max(self._now, scheduled[0].when())

    def call_at(  # type: ignore[override]
        self, when: float, callback: Callable[..., object], *args: Any, context: Any = None
    ) -> _Timer:
        """As the stock loop's, first in, first out among equal deadlines."""
        self._check_closed()  # type: ignore[attr-defined]
        timer = _Timer(when, callback, args, self, context)
        timer.place = next(self._places)
        heapq.heappush(self._scheduled, timer)  # type: ignore[attr-defined]
        timer._scheduled = True  # type: ignore[attr-defined]
        return timer

    def run_in_executor(self, executor: Any, func: Callable[..., Any], *args: Any) -> asyncio.Future[Any]:  # type: ignore[override]
        """As the stock loop's; virtual time stands still until the job is done."""
        future = super().run_in_executor(executor, func, *args)
        self.owed += 1
        future.add_done_callback(self._paid)
        return future

    async def shutdown_default_executor(self, timeout: float | None = None) -> None:  # noqa: ASYNC109 - stock name
        """As the stock loop's; really waits for the threads."""
        with self.hold():
            await super().shutdown_default_executor()

    @contextmanager
    def hold(self) -> Iterator[None]:
        """Let virtual time stand still while something outside (a thread of one's own) owes an answer."""
        self.owed += 1
        try:
            yield
        finally:
            self.owed -= 1

    def _paid(self, _: asyncio.Future[Any]) -> None:
        self.owed -= 1


class LoopClock:
    """Process time is the running loop's time; for virtual loops. UTC counts from a fixed day, so runs compare."""

    pace = 1.0

    def now_ns(self) -> int:
        """Loop time [ns]."""
        return round(asyncio.get_running_loop().time() * 1e9)

    def utc(self) -> str:
        """A fixed day plus loop time."""
        return (EPOCH + timedelta(microseconds=self.now_ns() // 1000)).isoformat(timespec="milliseconds")

    async def sleep_until(self, t_ns: int) -> None:
        """Return at or after ``t_ns``."""
        while (left_ns := t_ns - self.now_ns()) > 0:  # noqa: ASYNC110 - sleep may return early
            await asyncio.sleep(left_ns / 1e9)
