"""Bytes to and from a device.

``Link`` is a raw port with three makes (descriptor on the loop, owner thread, in-memory pair). ``Line`` is what a
driver gets: one request, one matching reply, a deadline. All deadlines here are *wall* seconds: devices do not get
faster when a simulation runs in scaled time.
"""

from __future__ import annotations

from typing import Protocol, TypeVar

T = TypeVar("T")
T_co = TypeVar("T_co", covariant=True)


class Link(Protocol):
    """An open port. After ``close``, and when the far end vanishes, every call raises ``LinkClosed``."""

    async def write(self, data: bytes) -> None:
        """Hand all bytes to the port. Raises ``LinkClosed``, or ``LinkTimeout`` when the far end takes nothing."""

    async def read(self) -> bytes:
        """Wait for at least one byte and return what there is. Cancelling loses no byte."""

    def drain_input(self) -> bytes:
        """Return and forget what has arrived; never waits."""

    async def close(self) -> None:
        """Release the port; safe to call twice."""


class ReplyReader(Protocol[T_co]):
    """Finds the reply to *one* request in a stream of bytes. Pure: no clock, no loop.

    ``feed`` returns the decoded reply as soon as it is complete, ``None`` while more is needed. It skips garbage, and
    whole frames that belong to another address or an earlier request. It raises ``DeviceProtocolError`` only for a
    frame that is certainly the answer and certainly wrong, and ``DeviceRefused`` for the device's "no".
    One that needs no reply at all returns something for ``feed(b"")``, which the line asks first.
    A reader whose replies carry the request's number says so by an attribute ``numbered = True``: then a late reply
    cannot be mistaken, and the line need not wait for it before the next request. One that reads what a device sends
    unasked says ``unsolicited = True``: then what has arrived before the call is not drained but read.
    """

    def feed(self, data: bytes) -> T_co | None:
        """Take the next bytes; return the reply or ``None``."""


class Line(Protocol):
    """A driver's way to its device: one exchange at a time, stale input drained before each request."""

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        """Send ``request`` and return the reply that ``reader`` finds.

        Raises ``LinkTimeout`` when none came in ``timeout_s`` (default: the link's), ``LinkClosed``,
        ``DeviceProtocolError`` or ``DeviceRefused``. Never retries: only the driver knows what may be said twice.
        """
