"""Word to the service manager that the guard is ready and alive: the datagram protocol of sd_notify(3), an open one.

Without ``NOTIFY_SOCKET`` in the environment nothing is sent. A manager that does not listen changes nothing.
"""

from __future__ import annotations

import contextlib
import os
import socket
import time


class Notifier:
    """Says ``READY=1`` once, ``WATCHDOG=1`` while tickets come (four times in the time that the manager allows)."""

    def __init__(self) -> None:
        address = os.environ.pop("NOTIFY_SOCKET", "")  # only the guard may speak for the service
        self._address = "\0" + address[1:] if address.startswith("@") else address
        self._every_s = int(os.environ.pop("WATCHDOG_USEC", "0") or 0) / 4e6
        self._told_s = -1e9
        self._ready = False

    def alive(self) -> None:
        """A good ticket has come."""
        if not self._address:
            return
        if not self._ready:
            self._ready = True
            self.say("READY=1\nSTATUS=the rig is watched")
        if self._every_s and time.monotonic() - self._told_s >= self._every_s:
            self._told_s = time.monotonic()
            self.say("WATCHDOG=1")

    def say(self, text: str) -> None:
        """Send, and never wait or fail."""
        if self._address:
            with contextlib.suppress(OSError), socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as line:
                line.setblocking(False)
                line.sendto(text.encode(), self._address)
