"""Opens ``socket://host:port``, the raw TCP port of a terminal server.

Not through pyserial: its close sleeps for 0.3 s and leaves the socket open when the far end has reset it.
"""

from __future__ import annotations

import socket
from urllib.parse import urlsplit

from rigd.adapters.descriptor_link import DescriptorLink
from rigd.model.errors import LinkClosed, LinkError

CONNECT_TIMEOUT_S = 5.0


def connect(url: str) -> socket.socket:
    """Connect (blocks); ``LinkError`` for a bad URL, ``LinkClosed`` when nobody answers there."""
    try:
        parts = urlsplit(url)
        host, port = parts.hostname, parts.port
    except ValueError as error:
        raise LinkError(f"{url!r} is no address: {error}") from error
    if not host or not port:
        raise LinkError(f"{url!r} is no address; write socket://host:port")
    try:
        connection = socket.create_connection((host, port), timeout=CONNECT_TIMEOUT_S)
    except OSError as error:
        raise LinkClosed(f"cannot connect to {url}: {error.strerror or error}") from error
    connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    connection.setblocking(False)
    return connection


def make_link(url: str, connection: socket.socket) -> DescriptorLink:
    """The link over a connected socket. What the kernel has taken cannot be called back here."""
    return DescriptorLink(url, connection.fileno(), connection.close, lambda: None)
