"""Bytes that have arrived and were not fetched yet; the half that all three makes of ``Link`` share.

One task reads at a time. A far end that talks without being asked fills at most ``INBOX_MAX`` bytes; then the oldest
go, because after such a flood only the newest can still be an answer.
"""

from __future__ import annotations

import asyncio

from rigd.model.errors import LinkClosed

INBOX_MAX = 65536


class Inbox:
    """A bounded buffer with one waiting reader, and the reason why nothing will come any more."""

    def __init__(self, loop: asyncio.AbstractEventLoop, most: int = INBOX_MAX) -> None:
        self._loop, self._most = loop, most
        self._bytes = bytearray()
        self._waiting: asyncio.Future[None] | None = None
        self.ended = ""

    def put(self, data: bytes) -> None:
        """Bytes have arrived."""
        self._bytes += data
        if len(self._bytes) > self._most:
            del self._bytes[: -self._most]
        self._wake()

    def end(self, reason: str) -> None:
        """Nothing will come any more; the first reason stands."""
        self.ended = self.ended or reason
        self._wake()

    def forget(self) -> None:
        """Drop what was not fetched (the port is being closed)."""
        self._bytes.clear()

    async def read(self) -> bytes:
        """At least one byte; what arrived before the end is still handed out. ``LinkClosed`` after that."""
        while not self._bytes:
            self.check()
            self._waiting = self._loop.create_future()
            try:
                await self._waiting
            finally:
                self._waiting = None
        return self._take()

    def drain(self) -> bytes:
        """Everything there is, at once; ``LinkClosed`` when the end was seen and nothing is left."""
        if not self._bytes:
            self.check()
        return self._take()

    def check(self) -> None:
        """Raise ``LinkClosed`` when the end was seen."""
        if self.ended:
            raise LinkClosed(self.ended)

    def _take(self) -> bytes:
        data = bytes(self._bytes)
        self._bytes.clear()
        return data

    def _wake(self) -> None:
        if self._waiting is not None and not self._waiting.done():
            self._waiting.set_result(None)
