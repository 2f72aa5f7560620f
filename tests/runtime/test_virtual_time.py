"""The virtual-time loop: exact, first in first out, frozen while a thread works, loud on a deadlock."""

from __future__ import annotations

import asyncio
import time
from collections.abc import Coroutine
from typing import Any, TypeVar

import pytest

from rigd.runtime.virtual_time import LoopClock, VirtualLoop

T = TypeVar("T")


def run(main: Coroutine[Any, Any, T]) -> T:
    with asyncio.Runner(loop_factory=VirtualLoop) as runner:
        return runner.run(main)


def test_an_hour_of_ticks_is_exact_and_quick() -> None:
    async def ticks() -> int:
        clock = LoopClock()
        for k in range(36_001):
            await clock.sleep_until(k * 100_000_000)
        return clock.now_ns()

    began = time.monotonic()
    assert run(ticks()) == 3600 * 1_000_000_000
    assert time.monotonic() - began < 10


def test_equal_deadlines_come_in_the_order_in_which_they_were_set() -> None:
    async def many() -> list[int]:
        loop, seen = asyncio.get_running_loop(), []
        for number in range(50):
            loop.call_at(1.0, seen.append, number)
        await asyncio.sleep(1.5)
        return seen

    assert run(many()) == list(range(50))


def test_timeouts_fire_at_their_time() -> None:
    async def late() -> float:
        loop = asyncio.get_running_loop()
        with pytest.raises(TimeoutError):
            async with asyncio.timeout(5):
                await asyncio.sleep(100)
        return loop.time()

    assert run(late()) == 5.0


def test_time_stands_still_while_a_thread_works() -> None:
    async def thread() -> tuple[str, float]:
        loop = asyncio.get_running_loop()
        async with asyncio.timeout(60):
            answer = await asyncio.to_thread(lambda: time.sleep(0.1) or "done")
        return answer, loop.time()

    answer, now = run(thread())
    assert answer == "done"
    assert now < 0.001


def test_a_deadlock_is_said_not_waited_for() -> None:
    async def stuck() -> None:
        await asyncio.Event().wait()

    with pytest.raises(RuntimeError, match="deadlock"):
        run(stuck())


def test_task_groups_and_queues_work() -> None:
    async def main() -> list[float]:
        queue: asyncio.Queue[float] = asyncio.Queue()

        async def producer(k: int) -> None:
            for _ in range(3):
                await asyncio.sleep(k)
                await queue.put(asyncio.get_running_loop().time())

        async with asyncio.TaskGroup() as group:
            group.create_task(producer(1))
            group.create_task(producer(2))
        return [queue.get_nowait() for _ in range(queue.qsize())]

    assert run(main()) == [1, 2, 2, 3, 4, 6]
