"""Ports that a master can open: pseudo-terminals and TCP listeners, behind one shape.

Both survive their master: it may come, go, be killed and come again. Bytes that nobody takes are lost, as on a wire.
"""

from __future__ import annotations

import contextlib
import os
import selectors
import socket
import tty
from collections.abc import Callable
from typing import Protocol

READ_MAX = 4096

Heard = Callable[[bytes], None]


class End(Protocol):
    """The device side of one open port. ``name`` is what the master opens."""

    name: str

    def attach(self, selector: selectors.BaseSelector, heard: Heard) -> None:
        """Call ``heard`` with what the master sends; the selector's data is a function to call when ready."""

    def send(self, data: bytes) -> None:
        """Give bytes to the master, if there is one and it takes them."""

    def close(self) -> None:
        """Release the port; safe to call twice."""


class PtyEnd:
    """A pseudo-terminal in raw mode. The far side is kept open here too, so a master that leaves ends nothing."""

    def __init__(self) -> None:
        self._near, self._far = os.openpty()
        tty.setraw(self._far)
        os.set_blocking(self._near, False)
        self.name = os.ttyname(self._far)
        self._open = True

    def attach(self, selector: selectors.BaseSelector, heard: Heard) -> None:
        """See ``End``."""
        selector.register(self._near, selectors.EVENT_READ, lambda: self._ready(heard))

    def send(self, data: bytes) -> None:
        """See ``End``."""
        with contextlib.suppress(BlockingIOError):
            os.write(self._near, data)

    def close(self) -> None:
        """See ``End``."""
        if self._open:
            self._open = False
            os.close(self._near)
            os.close(self._far)

    def _ready(self, heard: Heard) -> None:
        with contextlib.suppress(BlockingIOError):
            heard(os.read(self._near, READ_MAX))


class TcpEnd:
    """A listener on the loop-back address with one master at a time; a second one is turned away while it lives."""

    def __init__(self) -> None:
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._listener.setblocking(False)
        self.name = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._master: socket.socket | None = None
        self._selector: selectors.BaseSelector | None = None

    def attach(self, selector: selectors.BaseSelector, heard: Heard) -> None:
        """See ``End``."""
        self._selector = selector
        selector.register(self._listener, selectors.EVENT_READ, lambda: self._welcome(heard))

    def send(self, data: bytes) -> None:
        """See ``End``."""
        if self._master is None:
            return
        try:
            self._master.send(data)
        except BlockingIOError:
            pass
        except OSError:
            self._part()

    def close(self) -> None:
        """See ``End``."""
        self._part()
        self._listener.close()

    def _welcome(self, heard: Heard) -> None:
        try:
            guest, _ = self._listener.accept()
        except OSError:
            return
        if self._master is not None and self._gone(self._master):
            self._part()
        if self._master is not None or self._selector is None:
            guest.close()
            return
        guest.setblocking(False)
        guest.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._master = guest
        self._selector.register(guest, selectors.EVENT_READ, lambda: self._ready(guest, heard))

    @staticmethod
    def _gone(master: socket.socket) -> bool:
        """True when the master has closed its side: it may be gone before its farewell was read here."""
        try:
            return master.recv(1, socket.MSG_PEEK) == b""
        except BlockingIOError:
            return False
        except OSError:
            return True

    def _ready(self, master: socket.socket, heard: Heard) -> None:
        if master is not self._master:
            return
        try:
            data = master.recv(READ_MAX)
        except BlockingIOError:
            return
        except OSError:
            data = b""
        if data:
            heard(data)
        else:
            self._part()

    def _part(self) -> None:
        if self._master is not None:
            if self._selector is not None:
                self._selector.unregister(self._master)
            self._master.close()
            self._master = None


MAKERS: dict[str, Callable[[], End]] = {"pty": PtyEnd, "tcp": TcpEnd}
