"""A link over a port without a descriptor: ``rfc2217://``, ``spy://``, ``loop://``, and every port outside POSIX.

Two daemon threads own the port, one reads and one writes. Callers only touch queues, so a cancelled caller never
leaves a half-read reply behind, and a port that blocks for ever blocks nobody.
"""

from __future__ import annotations

import asyncio
import contextlib
import threading
from queue import SimpleQueue
from typing import Protocol

from rigd.adapters.inbox import Inbox
from rigd.model.errors import LinkTimeout

WRITE_TIMEOUT_S = 1.0


class BlockingPort(Protocol):
    """What is used of a pyserial object. ``read`` must return within its own time-out."""

    @property
    def in_waiting(self) -> int:
        """Bytes that can be read without waiting."""

    def read(self, size: int = 1, /) -> bytes:
        """Up to ``size`` bytes."""

    def write(self, data: bytes, /) -> int | None:
        """Write; may block."""

    def close(self) -> None:
        """Release the port."""


class _Letter:
    """Bytes to write, and where to tell that it was done."""

    __slots__ = ("data", "done")

    def __init__(self, data: bytes, done: asyncio.Future[None]) -> None:
        self.data = data
        self.done = done


class ThreadLink:
    """Implements ``rigd.ports.link.Link``."""

    def __init__(self, name: str, port: BlockingPort, write_timeout_s: float = WRITE_TIMEOUT_S) -> None:
        self._name = name
        self._port = port
        self._write_timeout_s = write_timeout_s
        self._loop = asyncio.get_running_loop()
        self._inbox = Inbox(self._loop)
        self._letters: SimpleQueue[_Letter | None] = SimpleQueue()
        self._closing: asyncio.Future[None] | None = None
        self._reader = threading.Thread(target=self._read_on, name=f"reads {name}", daemon=True)
        self._writer = threading.Thread(target=self._write_on, name=f"writes {name}", daemon=True)
        self._reader.start()
        self._writer.start()

    async def write(self, data: bytes) -> None:
        """Hand all bytes to the writing thread and wait until the port has taken them."""
        self._inbox.check()
        letter = _Letter(data, self._loop.create_future())
        self._letters.put(letter)
        try:
            async with asyncio.timeout(self._write_timeout_s):
                await letter.done
        except TimeoutError as error:
            raise LinkTimeout(f"{self._name} takes no bytes: {len(data)} were left") from error
        self._inbox.check()

    async def read(self) -> bytes:
        """Wait for at least one byte and return what there is."""
        return await self._inbox.read()

    def drain_input(self) -> bytes:
        """Return and forget what the reading thread has handed over."""
        return self._inbox.drain()

    async def close(self) -> None:
        """End both threads and release the port; the waiting is done in a helper thread."""
        if self._closing is None:
            self._inbox.end(f"{self._name} was closed")
            self._inbox.forget()
            self._letters.put(None)
            self._closing = self._loop.run_in_executor(None, self._release)
        await asyncio.shield(self._closing)

    def _release(self) -> None:
        cancel = getattr(self._port, "cancel_read", None)
        if cancel is not None:
            with contextlib.suppress(Exception):
                cancel()
        self._reader.join(self._write_timeout_s)
        self._writer.join(self._write_timeout_s)
        with contextlib.suppress(OSError):
            self._port.close()

    def _read_on(self) -> None:
        while not self._inbox.ended:
            try:
                data = self._port.read(max(1, self._port.in_waiting))
            except Exception as error:  # noqa: BLE001 - pyserial's makes raise whatever their libraries raise
                self._tell(self._inbox.end, f"{self._name} is gone ({error})")
                return
            if data:
                self._tell(self._inbox.put, data)

    def _write_on(self) -> None:
        while (letter := self._letters.get()) is not None:
            if letter.done.cancelled():  # given up while it waited: it must not go out late
                continue
            try:
                self._port.write(letter.data)
            except Exception as error:  # noqa: BLE001 - as above
                self._tell(self._inbox.end, f"{self._name} is gone ({error})")
            self._tell(_settle, letter.done)

    def _tell(self, function: object, *args: object) -> None:
        with contextlib.suppress(RuntimeError):  # the loop has ended
            self._loop.call_soon_threadsafe(function, *args)  # type: ignore[arg-type]


def _settle(done: asyncio.Future[None]) -> None:
    if not done.done():
        done.set_result(None)
