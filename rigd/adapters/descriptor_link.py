"""A link over any non-blocking descriptor, watched by the event loop: no thread, about 20 us a round trip.

The descriptor is watched all the time, not only while somebody reads: a far end that vanishes is then noticed at once.
"""

from __future__ import annotations

import asyncio
import contextlib
import os
from collections.abc import Callable

from rigd.adapters.inbox import Inbox
from rigd.model.errors import LinkTimeout

WRITE_TIMEOUT_S = 1.0
READ_SIZE = 65536


class DescriptorLink:
    """Implements ``rigd.ports.link.Link``. ``close_port`` may block; it runs in a thread.

    ``forget_output`` throws away what the operating system has taken but not sent: after a failed write, half a
    command must not reach the device seconds later.
    """

    def __init__(
        self,
        name: str,
        descriptor: int,
        close_port: Callable[[], None],
        forget_output: Callable[[], None],
        write_timeout_s: float = WRITE_TIMEOUT_S,
    ) -> None:
        self._name = name
        self._fd = descriptor
        self._close_port = close_port
        self._forget_output = forget_output
        self._write_timeout_s = write_timeout_s
        self._loop = asyncio.get_running_loop()
        self._inbox = Inbox(self._loop)
        self._closing: asyncio.Future[None] | None = None
        self._loop.add_reader(self._fd, self._readable)

    async def write(self, data: bytes) -> None:
        """Hand all bytes to the port; ``LinkTimeout`` when it takes nothing for the write time-out."""
        self._inbox.check()
        left = data[self._write_some(data) :]
        if not left:
            return
        try:
            async with asyncio.timeout(self._write_timeout_s):
                while left:
                    await self._writable()
                    left = left[self._write_some(left) :]
        except BaseException as error:
            self._discard_output()
            if isinstance(error, TimeoutError):
                raise LinkTimeout(f"{self._name} takes no bytes: {len(left)} of {len(data)} were left") from error
            raise

    async def read(self) -> bytes:
        """Wait for at least one byte and return what there is."""
        return await self._inbox.read()

    def drain_input(self) -> bytes:
        """Return and forget what has arrived, also what the loop has not fetched yet."""
        if not self._inbox.ended:
            self._readable()
        return self._inbox.drain()

    async def close(self) -> None:
        """Stop watching at once; release the port in a thread, because some ports block while closing."""
        if self._closing is None:
            self._end(f"{self._name} was closed")
            self._inbox.forget()
            self._closing = self._loop.run_in_executor(None, self._close_port)
        await asyncio.shield(self._closing)

    def _readable(self) -> None:
        try:
            data = os.read(self._fd, READ_SIZE)
        except (BlockingIOError, InterruptedError):
            return
        except OSError as error:
            self._end(f"{self._name} is gone ({error.strerror})")
            return
        if data:
            self._inbox.put(data)
        else:
            self._end(f"{self._name} is gone (end of file)")

    def _write_some(self, data: bytes) -> int:
        try:
            return os.write(self._fd, data)
        except (BlockingIOError, InterruptedError):
            return 0
        except OSError as error:
            self._end(f"{self._name} is gone ({error.strerror})")
            self._inbox.check()
            raise

    async def _writable(self) -> None:
        self._inbox.check()
        ready: asyncio.Future[None] = self._loop.create_future()
        self._loop.add_writer(self._fd, _mark, ready)
        try:
            await ready
        finally:
            if not self._inbox.ended:
                self._loop.remove_writer(self._fd)
        self._inbox.check()

    def _discard_output(self) -> None:
        if not self._inbox.ended:
            with contextlib.suppress(OSError):
                self._forget_output()

    def _end(self, reason: str) -> None:
        if not self._inbox.ended:
            self._loop.remove_reader(self._fd)
            self._loop.remove_writer(self._fd)
        self._inbox.end(reason)


def _mark(ready: asyncio.Future[None]) -> None:
    if not ready.done():
        ready.set_result(None)
