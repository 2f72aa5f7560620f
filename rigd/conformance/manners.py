"""What a driver must never do, whatever its protocol: swallow a cancellation, hold up the loop, raise what the contract
does not know, tell an identity that nobody gave, keep the line. Part of the battery (``DriverContract``)."""

from __future__ import annotations

import asyncio
import contextlib
import time
from collections.abc import Awaitable, Callable, Generator
from random import Random
from typing import Any, TypeVar

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigd.conformance.bench import TIMEOUT_S, Bench, DriverCase, bench, bent, order, run, virtually
from rigd.model.errors import DeviceRefused, LinkError, LinkTimeout, ProtocolError, WrongDevice
from rigd.ports.link import Line, ReplyReader

T = TypeVar("T")

BLOCKED_S = 0.05
"""A step between two awaits that takes longer than this (wall) holds up the stops of all other devices."""
GATHERED = 20
"""Turns of the loop after which a call that was cancelled must be over."""
AFTER_S = 60.0
"""Virtual time in which nothing more may come from a call that has ended."""
Call = Callable[[Bench], Awaitable[object]]


class Timed(Awaitable[T]):
    """Awaits what it is given and notes the longest step between two awaits [wall s]."""

    def __init__(self, work: Awaitable[T]) -> None:
        self._work = work
        self.longest_s = 0.0

    def __await__(self) -> Generator[Any, Any, T]:
        steps = self._work.__await__()
        while True:
            began = time.perf_counter()
            try:
                wanted = next(steps)
            except StopIteration as end:
                self.longest_s = max(self.longest_s, time.perf_counter() - began)
                return end.value  # type: ignore[no-any-return]
            self.longest_s = max(self.longest_s, time.perf_counter() - began)
            yield wanted


class Lent:
    """A line that is lent for one call and may not be used afterwards."""

    def __init__(self, line: Line) -> None:
        self._line, self.over, self.misused = line, False, 0

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        self.misused += self.over
        return await self._line.ask(request, reader, timeout_s=timeout_s)


class Manners:
    """Derive from ``DriverContract``, not from this."""

    case: DriverCase

    def calls(self) -> dict[str, Call]:
        """Every call that a driver takes, each with the bench that it is made on."""
        case = self.case
        named: dict[str, Call] = {
            "identify": lambda one: one.driver.identify(one.line),
            "prepare": lambda one: one.driver.prepare(one.line),
            "poll": lambda one: one.driver.poll(one.line, case.read),
        }
        for action, value in case.orders.items():
            named[action.value] = lambda one, a=action, v=value: one.driver.execute(one.line, order(a, v))  # type: ignore[misc]
        return named

    @virtually
    async def test_a_cancelled_call_is_over_at_once_and_says_so(self) -> None:
        """``CancelledError`` goes through, and nothing more is sent: no order may outlive the call that gave it."""
        for name, call in self.calls().items():
            async with bench(self.case) as one:
                await one.ready()
                one.deaf = True
                already = len(one.requests)
                task = asyncio.ensure_future(call(one))
                await asyncio.sleep(TIMEOUT_S / 2)
                if name == "prepare" and len(one.requests) == already:
                    continue  # a device without settings has nothing to be prepared
                assert not task.done(), f"{name} did not ask the device: it was over before the silent device answered"
                task.cancel()
                sent = len(one.requests)
                for _ in range(GATHERED):
                    await asyncio.sleep(0)
                assert task.done(), f"{name} went on after it was cancelled"
                assert task.cancelled(), f"{name} swallowed its cancellation"
                await asyncio.sleep(AFTER_S)
                assert len(one.requests) == sent, f"{name} sent {one.requests[sent:]} after it was cancelled"

    @virtually
    async def test_no_step_holds_up_the_loop(self) -> None:
        """The best of three, because a busy computer may be slow once; a driver that waits by blocking always is."""
        for name, call in self.calls().items():
            steps = []
            for _ in range(3):
                async with bench(self.case) as one:
                    timed = Timed(call(await one.ready()))
                    await timed
                    steps.append(timed.longest_s)
                    if timed.longest_s < BLOCKED_S:
                        break
            assert min(steps) < BLOCKED_S, f"{name} held the loop up for {min(steps):.3f} s; await, or use a thread"

    @given(seed=st.integers(0, 10**9))
    @settings(max_examples=60, deadline=None, suppress_health_check=list(HealthCheck))
    def test_bad_bytes_raise_only_what_the_contract_knows(self, seed: int) -> None:
        async def work() -> None:
            chance = Random(seed)
            on = False

            def hook(data: bytes) -> list[tuple[float, bytes]]:
                if not on:
                    return [(0, data)]
                if chance.random() < 0.3:
                    return [(0, bytes(chance.randrange(256) for _ in range(chance.randrange(1, 80))) + b"\r\n")]
                return bent(chance.randrange(10**9), data, self.case)

            name, call = chance.choice(sorted(self.calls().items()))
            async with bench(self.case, hook) as one:
                await one.ready()
                on = True
                try:
                    await call(one)
                except (LinkError, ProtocolError, DeviceRefused):
                    pass
                except WrongDevice:
                    assert name in ("identify", "prepare"), f"{name} raised WrongDevice"

        run(work())

    @virtually
    async def test_identity_is_asked_for_at_every_open(self) -> None:
        """A cable may have been put into another device while nobody looked."""
        async with bench(self.case) as one:
            for _ in range(2):
                already = len(one.requests)
                await one.driver.identify(one.line)
                assert len(one.requests) > already, "identify told who is there without asking"
            one.deaf = True
            with pytest.raises(LinkTimeout):
                await one.driver.identify(one.line)

    @virtually
    async def test_another_device_in_its_place_is_seen(self) -> None:
        assert self.case.exchanged is not None, "the case must say how its peer becomes another one (`exchanged`)"
        async with bench(self.case) as one:
            known = await one.driver.identify(one.line)
            self.case.exchanged(one.peer)
            with contextlib.suppress(WrongDevice, DeviceRefused, ProtocolError):
                assert await one.driver.identify(one.line) != known
            assert known.simulated == self.case.simulated, "only the device itself may say that it is simulated"

    @virtually
    async def test_the_line_is_used_during_the_call_only(self) -> None:
        """Each call is lent another line, as after a reconnection; what is kept of an earlier one belongs to nobody."""
        async with bench(self.case) as one:
            lent: list[Lent] = []
            true_line = one.line
            for name, call in [(n, c) for n, c in self.calls().items() for _ in range(2)]:
                tasks = asyncio.all_tasks()
                lent.append(Lent(true_line))
                one.line = lent[-1]
                await call(one)
                lent[-1].over = True
                assert asyncio.all_tasks() <= tasks, f"{name} left a task behind: {asyncio.all_tasks() - tasks}"
                assert not any(line.misused for line in lent), f"{name} used the line of an earlier call"
            await asyncio.sleep(AFTER_S)
            assert not any(line.misused for line in lent), "a line was used after its call"
