"""The outbox: kept messages in order, others newest, the head safe until sent."""

from __future__ import annotations

import asyncio
from dataclasses import dataclass

from rigd.front.outbox import Outbox


@dataclass(frozen=True)
class Note:
    number: int
    keep: bool


async def test_kept_first_and_in_order_then_the_rest() -> None:
    box: Outbox[Note] = Outbox()
    for number, keep in [(1, False), (2, True), (3, True), (4, False)]:
        box.put(Note(number, keep))
    seen = []
    while len(box):
        note = await box.head()
        box.sent(note)
        seen.append(note.number)
    assert seen == [2, 3, 1, 4]


async def test_head_stays_until_sent() -> None:
    box: Outbox[Note] = Outbox()
    box.put(Note(1, True))
    first = await box.head()
    assert await box.head() is first
    box.sent(first)
    assert len(box) == 0


async def test_passing_messages_drop_the_oldest_and_are_counted() -> None:
    box: Outbox[Note] = Outbox(passing_max=3)
    for number in range(10):
        box.put(Note(number, False))
    assert box.dropped == 7
    assert (await box.head()).number == 7


async def test_head_waits_and_emptied_tells() -> None:
    box: Outbox[Note] = Outbox()
    await asyncio.wait_for(box.emptied(), 1)
    waiting = asyncio.create_task(box.head())
    await asyncio.sleep(0)
    assert not waiting.done()
    box.put(Note(1, True))
    note = await asyncio.wait_for(waiting, 1)
    done = asyncio.create_task(box.emptied())
    await asyncio.sleep(0)
    assert not done.done()
    box.sent(note)
    await asyncio.wait_for(done, 1)
