"""Two links joined in memory, with a hook that may drop, bend, split, double or delay bytes on their way.

No descriptor and no thread: works on a virtual-time loop, where a delay costs nothing.
"""

from __future__ import annotations

import asyncio
from collections import deque
from collections.abc import Callable, Iterable

from rigd.adapters.inbox import Inbox

Hook = Callable[[bytes], Iterable[tuple[float, bytes]]]
"""What becomes of written bytes: pieces, each with a delay [s] after the write. Pieces never overtake each other."""


def untouched(data: bytes) -> Iterable[tuple[float, bytes]]:
    """The hook that changes nothing."""
    return ((0.0, data),)


class MemoryLink:
    """One end. Implements ``rigd.ports.link.Link``."""

    def __init__(self, name: str, hook: Hook) -> None:
        self._name = name
        self._loop = asyncio.get_running_loop()
        self._inbox = Inbox(self._loop)
        self._on_way: deque[tuple[float, bytes]] = deque()
        self._timer: asyncio.TimerHandle | None = None
        self.hook = hook
        self.far: MemoryLink

    async def write(self, data: bytes) -> None:
        """Send the bytes through the hook to the other end."""
        self._inbox.check()
        now = self._loop.time()
        for delay_s, piece in self.hook(data):
            if delay_s <= 0 and not self._on_way:
                self.far._inbox.put(piece)
            else:
                self._on_way.append((now + delay_s, piece))
        self._schedule()

    async def read(self) -> bytes:
        """Wait for at least one byte and return what there is."""
        return await self._inbox.read()

    def drain_input(self) -> bytes:
        """Return and forget what has arrived."""
        return self._inbox.drain()

    async def close(self) -> None:
        """Close both ends, as a pulled cable does; safe to call twice."""
        for end in (self, self.far):
            end._inbox.end(f"{end._name} was closed")
            end._on_way.clear()
            if end._timer is not None:
                end._timer.cancel()
        self._inbox.forget()

    def _schedule(self) -> None:
        if self._on_way and (self._timer is None or self._timer.cancelled()):
            self._timer = self._loop.call_at(self._on_way[0][0], self._arrive)

    def _arrive(self) -> None:
        self._timer = None
        now = self._loop.time()
        while self._on_way and self._on_way[0][0] <= now:
            self.far._inbox.put(self._on_way.popleft()[1])
        self._schedule()


def memory_pair(
    name: str = "memory", *, there: Hook = untouched, back: Hook = untouched
) -> tuple[MemoryLink, MemoryLink]:
    """(the daemon's end, the device's end); ``there`` bends what the daemon writes, ``back`` what the device writes."""
    near, far = MemoryLink(name, there), MemoryLink(f"{name} (device)", back)
    near.far, far.far = far, near
    return near, far
