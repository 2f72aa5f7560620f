"""A bounded queue between the rig and a slow world: kept messages in order, the rest newest first to go.

``put`` never waits. When full, the oldest message that need not be kept is dropped and counted; kept messages are
dropped (and counted apart) only beyond ``keep_max``. The head stays in the box until it was handed over, so a
connection that breaks in the middle sends it again rather than losing it.
"""

from __future__ import annotations

import asyncio
from collections import deque
from typing import Generic, Protocol, TypeVar


class Kept(Protocol):
    """What an outbox needs to know of a message."""

    @property
    def keep(self) -> bool:
        """True when it must not be dropped."""


M = TypeVar("M", bound=Kept)


class Outbox(Generic[M]):
    """See the module; one consumer."""

    def __init__(self, passing_max: int = 500, keep_max: int = 20_000) -> None:
        self._kept: deque[M] = deque()
        self._passing: deque[M] = deque()
        self._passing_max = passing_max
        self._keep_max = keep_max
        self._wake = asyncio.Event()
        self._empty = asyncio.Event()
        self._empty.set()
        self.dropped = 0
        self.dropped_kept = 0

    def __len__(self) -> int:
        return len(self._kept) + len(self._passing)

    def put(self, message: M) -> None:
        """Add a message; never waits."""
        if message.keep:
            self._kept.append(message)
            if len(self._kept) > self._keep_max:
                self._kept.popleft()
                self.dropped_kept += 1
        else:
            self._passing.append(message)
            if len(self._passing) > self._passing_max:
                self._passing.popleft()
                self.dropped += 1
        self._wake.set()
        self._empty.clear()

    async def emptied(self) -> None:
        """Wait until nothing is left in the box."""
        await self._empty.wait()

    async def head(self) -> M:
        """Wait for a message and return the first one, which stays in the box; kept ones go first."""
        while not len(self):
            self._wake.clear()
            await self._wake.wait()
        return self._kept[0] if self._kept else self._passing[0]

    def sent(self, message: M) -> None:
        """The message was handed over: take it out of the box."""
        box = self._kept if message.keep else self._passing
        if box and box[0] is message:
            box.popleft()
        if not len(self):
            self._empty.set()
