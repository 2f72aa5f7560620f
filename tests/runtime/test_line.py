"""The line: deadline, fences against late replies, turns, cancellation. Virtual time, in memory."""

from __future__ import annotations

import asyncio
from collections.abc import Awaitable, Callable
from typing import Any

import pytest

from rigd.adapters.memory_link import MemoryLink, memory_pair
from rigd.model.errors import DeviceRefused, LinkClosed, LinkTimeout
from rigd.runtime.line import QUIET_S, LinkLine
from rigd.runtime.virtual_time import VirtualLoop

TIMEOUT_S = 0.3


class FirstLine:
    """Takes any line for the answer; ``no`` is a refusal."""

    def __init__(self) -> None:
        self._kept = b""

    def feed(self, data: bytes) -> bytes | None:
        self._kept += data
        line, end, _ = self._kept.partition(b"\n")
        if line == b"no":
            raise DeviceRefused("no")
        return line if end else None


class Numbered(FirstLine):
    numbered = True


class Lines:
    """A line, the far end of its link, and what was traced."""

    def __init__(self) -> None:
        self.near, self.far = memory_pair()
        self.traced: list[tuple[bool, bytes]] = []
        self.line = LinkLine(self.near, name="bus", timeout_s=TIMEOUT_S, trace=lambda *seen: self.traced.append(seen))

    async def answers(self, *answers: tuple[float, bytes]) -> None:
        """Answer the requests to come, each after a delay [s]."""
        for delay_s, answer in answers:
            await self.far.read()
            await asyncio.sleep(delay_s)
            await self.far.write(answer)


def virtual(test: Callable[[Lines], Awaitable[None]]) -> Callable[[], None]:
    async def whole() -> None:
        await test(Lines())

    def plain() -> None:
        with asyncio.Runner(loop_factory=VirtualLoop) as runner:
            runner.run(whole())

    plain.__name__ = test.__name__
    return plain


def now_s() -> float:
    return asyncio.get_running_loop().time()


@virtual
async def test_one_request_one_reply(on: Lines) -> None:
    device = asyncio.create_task(on.answers((0.0, b"yes\n")))
    assert await on.line.ask(b"well?", FirstLine()) == b"yes"
    await device
    assert on.traced == [(True, b"well?"), (False, b"yes\n")]


@virtual
async def test_silence_is_a_timeout_that_names_the_line(on: Lines) -> None:
    with pytest.raises(LinkTimeout, match=r"bus: no reply within 0\.3 s"):
        await on.line.ask(b"x", FirstLine())
    assert now_s() == pytest.approx(TIMEOUT_S)


@virtual
async def test_half_a_reply_is_a_timeout_that_says_so(on: Lines) -> None:
    device = asyncio.create_task(on.answers((0.0, b"half")))
    with pytest.raises(LinkTimeout, match="4 bytes but no whole reply within 1 s"):
        await on.line.ask(b"x", FirstLine(), timeout_s=1.0)
    await device


@virtual
async def test_a_device_that_talks_all_the_time_does_not_stretch_the_deadline(on: Lines) -> None:
    async def chatter() -> None:
        while True:
            await on.far.write(b"x")
            await asyncio.sleep(0.001)

    device = asyncio.create_task(chatter())
    with pytest.raises(LinkTimeout):
        await on.line.ask(b"x", FirstLine())
    assert now_s() == pytest.approx(TIMEOUT_S, abs=0.002)
    device.cancel()


@virtual
async def test_what_came_unasked_is_drained_before_a_request(on: Lines) -> None:
    await on.far.write(b"stale\n")
    device = asyncio.create_task(on.answers((0.0, b"fresh\n")))
    assert await on.line.ask(b"x", FirstLine()) == b"fresh"
    await device


@virtual
async def test_a_late_reply_is_waited_out_where_it_could_be_mistaken(on: Lines) -> None:
    device = asyncio.create_task(on.answers((1.5 * TIMEOUT_S, b"late\n"), (0.0, b"fresh\n")))
    with pytest.raises(LinkTimeout):
        await on.line.ask(b"first", FirstLine())
    assert await on.line.ask(b"second", FirstLine()) == b"fresh"
    assert now_s() == pytest.approx(1.5 * TIMEOUT_S + QUIET_S)
    await device


@virtual
async def test_a_late_reply_in_pieces_is_waited_out_to_its_end(on: Lines) -> None:
    async def device() -> None:
        await on.far.read()
        await asyncio.sleep(1.2 * TIMEOUT_S)
        await on.far.write(b"la")
        await asyncio.sleep(0.6 * QUIET_S)
        await on.far.write(b"te\n")
        await on.far.read()
        await on.far.write(b"fresh\n")

    answering = asyncio.create_task(device())
    with pytest.raises(LinkTimeout):
        await on.line.ask(b"first", FirstLine())
    assert await on.line.ask(b"second", FirstLine()) == b"fresh"
    await answering


@virtual
async def test_without_a_late_reply_the_wait_ends_after_one_more_timeout(on: Lines) -> None:
    with pytest.raises(LinkTimeout):
        await on.line.ask(b"first", FirstLine())
    on.far.drain_input()  # it never heard the first
    device = asyncio.create_task(on.answers((0.0, b"fresh\n")))
    assert await on.line.ask(b"second", FirstLine()) == b"fresh"
    assert now_s() == pytest.approx(2 * TIMEOUT_S)
    await device


@virtual
async def test_numbered_replies_need_no_waiting(on: Lines) -> None:
    with pytest.raises(LinkTimeout):
        await on.line.ask(b"first", Numbered())
    on.far.drain_input()
    device = asyncio.create_task(on.answers((0.0, b"fresh\n")))
    assert await on.line.ask(b"second", Numbered()) == b"fresh"
    assert now_s() == pytest.approx(TIMEOUT_S)
    await device


@virtual
async def test_a_refusal_is_an_answer_nothing_is_owed(on: Lines) -> None:
    device = asyncio.create_task(on.answers((0.0, b"no\n"), (0.0, b"yes\n")))
    with pytest.raises(DeviceRefused):
        await on.line.ask(b"first", FirstLine())
    assert await on.line.ask(b"second", FirstLine()) == b"yes"
    assert now_s() == 0.0
    await device


@virtual
async def test_a_cancelled_request_still_owes_its_reply(on: Lines) -> None:
    device = asyncio.create_task(on.answers((0.2, b"late\n"), (0.0, b"fresh\n")))
    first = asyncio.create_task(on.line.ask(b"first", FirstLine()))
    await asyncio.sleep(0.1)
    first.cancel()
    with pytest.raises(asyncio.CancelledError):
        await first
    assert await on.line.ask(b"second", FirstLine()) == b"fresh"
    await device


@virtual
async def test_one_exchange_at_a_time_in_the_order_of_asking(on: Lines) -> None:
    asked: list[bytes] = []

    async def device() -> None:
        while True:
            request = await on.far.read()
            asked.append(request)
            await asyncio.sleep(0.05)
            await on.far.write(request + b"\n")

    answering = asyncio.create_task(device())
    names = [b"a", b"b", b"c"]
    waiting: list[asyncio.Task[Any]] = [asyncio.create_task(on.line.ask(name, FirstLine())) for name in names]
    assert await asyncio.gather(*waiting) == names
    assert asked == names
    answering.cancel()


@virtual
async def test_a_pulled_cable_is_said_at_once(on: Lines) -> None:
    async def pull(end: MemoryLink) -> None:
        await asyncio.sleep(0.1)
        await end.close()

    pulling = asyncio.create_task(pull(on.far))
    with pytest.raises(LinkClosed):
        await on.line.ask(b"x", FirstLine())
    assert now_s() == pytest.approx(0.1)
    with pytest.raises(LinkClosed):
        await on.line.ask(b"x", FirstLine())
    await pulling
