"""The in-memory pair and its hook."""

from __future__ import annotations

import asyncio

import pytest

from rigd.adapters.inbox import INBOX_MAX
from rigd.adapters.memory_link import memory_pair
from rigd.model.errors import LinkClosed


async def test_both_directions_and_drain() -> None:
    near, far = memory_pair()
    await near.write(b"ask")
    assert await far.read() == b"ask"
    await far.write(b"an")
    await far.write(b"swer")
    assert near.drain_input() == b"answer"
    assert near.drain_input() == b""


async def test_the_hook_drops_bends_and_doubles() -> None:
    near, far = memory_pair(there=lambda data: (), back=lambda data: [(0, data.upper()), (0, data)])
    await near.write(b"lost")
    assert far.drain_input() == b""
    await far.write(b"ok")
    assert near.drain_input() == b"OKok"


async def test_delayed_pieces_never_overtake() -> None:
    delays = iter([0.03, 0.0, 0.01])
    near, far = memory_pair(there=lambda data: [(next(delays), data)])
    for piece in (b"1", b"2", b"3"):
        await near.write(piece)
    assert far.drain_input() == b""
    got = b""
    while len(got) < 3:
        got += await asyncio.wait_for(far.read(), 1)
    assert got == b"123"


async def test_close_is_a_pulled_cable_for_both() -> None:
    near, far = memory_pair(there=lambda data: [(0.01, data)])
    await near.write(b"on its way")
    waiting = asyncio.create_task(far.read())
    await asyncio.sleep(0)
    await near.close()
    with pytest.raises(LinkClosed):
        await waiting
    with pytest.raises(LinkClosed):
        await far.write(b"x")
    await asyncio.sleep(0.02)
    with pytest.raises(LinkClosed):
        near.drain_input()


async def test_a_flood_keeps_the_newest_bytes() -> None:
    near, far = memory_pair()
    for _ in range(3):
        await far.write(b"x" * INBOX_MAX)
    await far.write(b"newest")
    got = near.drain_input()
    assert len(got) == INBOX_MAX
    assert got.endswith(b"newest")
