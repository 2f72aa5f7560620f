"""socket://, rfc2217:// (against pyserial's own server class) and the owner threads."""

from __future__ import annotations

import asyncio
import contextlib
import socket
import threading
import time
from collections.abc import Callable, Iterator

import pytest
import serial
import serial.rfc2217

from rigd.adapters.descriptor_link import DescriptorLink
from rigd.adapters.open_link import open_link
from rigd.adapters.thread_link import ThreadLink
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkClosed, LinkTimeout


class Server:
    """One TCP client at a time, handed to a function in a thread."""

    def __init__(self, serve: Callable[[socket.socket], None]) -> None:
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._serve = serve
        self.port = self._listener.getsockname()[1]
        self._thread = threading.Thread(target=self._run, daemon=True)
        self._thread.start()

    def _run(self) -> None:
        with contextlib.suppress(OSError):
            while True:
                client, _ = self._listener.accept()
                with client:
                    self._serve(client)

    def close(self) -> None:
        with contextlib.suppress(OSError):
            self._listener.shutdown(socket.SHUT_RDWR)
        self._listener.close()
        self._thread.join(2)


def echo(client: socket.socket) -> None:
    with contextlib.suppress(OSError):
        while data := client.recv(4096):
            client.sendall(data)


class _Lines(serial.Serial):  # type: ignore[misc]
    """A port that is only modem lines: pyserial's server class asks for them; a pseudo-terminal has none."""

    cts = dsr = ri = cd = property(lambda self: False)  # type: ignore[assignment]


def rfc2217_echo(client: socket.socket) -> None:
    class Connection:
        def write(self, data: bytes) -> None:
            client.sendall(data)

    port = serial.serial_for_url("loop://", timeout=0.01)
    manager = serial.rfc2217.PortManager(port, Connection())
    client.settimeout(0.01)
    with contextlib.suppress(OSError):
        while True:
            with contextlib.suppress(TimeoutError):
                data = client.recv(1024)
                if not data:
                    break
                client.sendall(b"".join(manager.escape(b"".join(manager.filter(data)))))
    port.close()


@pytest.fixture
def serve() -> Iterator[Callable[[Callable[[socket.socket], None]], int]]:
    servers: list[Server] = []

    def start(function: Callable[[socket.socket], None]) -> int:
        servers.append(Server(function))
        return servers[-1].port

    yield start
    for server in servers:
        server.close()


Serve = Callable[[Callable[[socket.socket], None]], int]


async def everything(link: DescriptorLink | ThreadLink, count: int) -> bytes:
    got = b""
    while len(got) < count:
        got += await asyncio.wait_for(link.read(), 5)
    return got


async def test_socket_round_trip_on_the_loop_and_a_fast_close(serve: Serve) -> None:
    link = await open_link(LinkSpec("bus", f"socket://127.0.0.1:{serve(echo)}"))
    assert isinstance(link, DescriptorLink)
    await link.write(bytes(range(256)))
    assert await everything(link, 256) == bytes(range(256))
    started = time.monotonic()
    await link.close()
    assert time.monotonic() - started < 0.1


async def test_socket_far_end_vanishes_and_comes_back(serve: Serve) -> None:
    port = serve(lambda client: client.sendall(b"bye"))
    for _ in range(2):
        link = await open_link(LinkSpec("bus", f"socket://127.0.0.1:{port}"))
        assert await everything(link, 3) == b"bye"
        with pytest.raises(LinkClosed, match="is gone"):
            await asyncio.wait_for(link.read(), 5)
        await link.close()


async def test_socket_deaf_end_times_out(serve: Serve) -> None:
    done = threading.Event()
    link = await open_link(LinkSpec("bus", f"socket://127.0.0.1:{serve(lambda client: done.wait(5) and None)}"))
    assert isinstance(link, DescriptorLink)
    link._write_timeout_s = 0.1
    with pytest.raises(LinkTimeout, match="takes no bytes"):
        await link.write(b"z" * 20_000_000)
    done.set()
    await link.close()


@pytest.mark.filterwarnings("ignore:set(Daemon|Name)")  # pyserial 3.5 itself
async def test_rfc2217_round_trip_through_threads(serve: Serve) -> None:
    link = await open_link(LinkSpec("bus", f"rfc2217://127.0.0.1:{serve(rfc2217_echo)}"))
    assert isinstance(link, ThreadLink)
    await link.write(b"{1101 who?}\xff\x00\n")
    assert await everything(link, 14) == b"{1101 who?}\xff\x00\n"
    await link.close()
    with pytest.raises(LinkClosed):
        await link.read()


async def test_loop_port_goes_through_threads_and_drains() -> None:
    link = await open_link(LinkSpec("bus", "loop://"))
    assert isinstance(link, ThreadLink)
    await link.write(b"once")
    assert await everything(link, 4) == b"once"
    await link.write(b"stale")
    await asyncio.sleep(0.05)
    assert link.drain_input() == b"stale"
    await link.close()
    await link.close()


class Stubborn:
    """A port whose write blocks until it is closed, and that then breaks."""

    def __init__(self) -> None:
        self.closed = threading.Event()
        self.in_waiting = 0

    def read(self, size: int = 1) -> bytes:
        if self.closed.wait(0.01):
            raise serial.SerialException("unplugged")
        return b""

    def write(self, data: bytes) -> int:
        self.closed.wait(10)
        return len(data)

    def close(self) -> None:
        self.closed.set()


async def test_a_port_that_blocks_for_ever_blocks_nobody() -> None:
    port = Stubborn()
    link = ThreadLink("stubborn", port, write_timeout_s=0.05)
    with pytest.raises(LinkTimeout, match="takes no bytes"):
        await link.write(b"first")
    with pytest.raises(LinkTimeout):
        await link.write(b"second, never to be written")
    await asyncio.wait_for(link.close(), 2)
    assert port.closed.is_set()


async def test_a_thread_port_that_breaks_ends_the_link() -> None:
    port = Stubborn()
    link = ThreadLink("stubborn", port)
    port.closed.set()
    with pytest.raises(LinkClosed, match="unplugged"):
        await asyncio.wait_for(link.read(), 2)
    await link.close()
