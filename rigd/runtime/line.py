"""The line to the devices of one link: one exchange at a time, each with a deadline (``rigd.ports.link.Line``).

A reply that comes after its deadline must never be taken for the answer to the next request. Three fences: input is
drained before each request; a reader whose replies are numbered rejects foreign ones; and where they are not, the line
waits out what an unanswered request may still bring: until something came and the line has been quiet for
``QUIET_S``, or until the time-out has passed once more.
"""

from __future__ import annotations

import asyncio
from collections.abc import Callable
from typing import TypeVar

from rigd.model.errors import DeviceRefused, LinkTimeout, ProtocolError
from rigd.ports.link import Link, ReplyReader

T = TypeVar("T")

QUIET_S = 0.03
"""A gap that ends a late reply: 20 to 50 ms is common practice through USB adapters, no source."""

Trace = Callable[[bool, bytes], None]
"""Called with (sent, data) for all bytes of a traced link."""


class LinkLine:
    """Exchanges over a link. One exchange at a time, in the order of asking; a waiting one may be cancelled."""

    def __init__(self, link: Link, *, name: str, timeout_s: float, trace: Trace | None = None) -> None:
        self._link = link
        self._name = name
        self._timeout_s = timeout_s
        self._trace = trace
        self._turn = asyncio.Lock()
        self._loop = asyncio.get_running_loop()
        self._owed_until = 0.0

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        """Send ``request`` and return the reply that ``reader`` finds; see the port for the errors."""
        limit_s = self._timeout_s if timeout_s is None else timeout_s
        async with self._turn:
            if self._owed_until and not getattr(reader, "numbered", False):
                await self._wait_out()
            self._owed_until = max(self._owed_until, self._loop.time() + 2 * limit_s)
            try:
                answer = await self._exchange(request, reader, limit_s)
            except (DeviceRefused, ProtocolError):  # answers too
                self._owed_until = 0.0
                raise
            self._owed_until = 0.0
        return answer

    async def _exchange(self, request: bytes, reader: ReplyReader[T], limit_s: float) -> T:
        seen = 0
        if not getattr(reader, "unsolicited", False):
            self._note(False, self._link.drain_input())
        try:
            async with asyncio.timeout(limit_s):
                if request:
                    self._note(True, request)
                    await self._link.write(request)
                if (answer := reader.feed(b"")) is not None:
                    return answer  # a request that has no reply
                while True:
                    data = await self._link.read()
                    seen += len(data)
                    self._note(False, data)
                    answer = reader.feed(data)
                    if answer is not None:
                        return answer
        except TimeoutError as error:
            what = f"{seen} bytes but no whole reply" if seen else "no reply"
            raise LinkTimeout(f"{self._name}: {what} within {limit_s:g} s") from error

    async def _wait_out(self) -> None:
        came = False
        while (left_s := self._owed_until - self._loop.time()) > 0:
            try:
                async with asyncio.timeout(min(left_s, QUIET_S) if came else left_s):
                    self._note(False, await self._link.read())
            except TimeoutError:
                break
            came = True

    def _note(self, sent: bool, data: bytes) -> None:
        if self._trace is not None and data:
            self._trace(sent, data)
