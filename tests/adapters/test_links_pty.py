"""Links over real pseudo-terminals, opened by pyserial; the device end is a plain descriptor."""

from __future__ import annotations

import asyncio
import os
import tty
from collections.abc import Iterator
from pathlib import Path

import pytest

from rigd.adapters.descriptor_link import DescriptorLink
from rigd.adapters.open_link import open_link
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkBusy, LinkClosed, LinkError, LinkTimeout


class Far:
    """The device end of a pseudo-terminal."""

    def __init__(self) -> None:
        self.master, self._slave = os.openpty()
        tty.setraw(self._slave)
        os.set_blocking(self.master, False)
        self.name = os.ttyname(self._slave)

    def close(self) -> None:
        for descriptor in (self.master, self._slave):
            if descriptor >= 0:
                os.close(descriptor)
        self.master = self._slave = -1


@pytest.fixture
def far() -> Iterator[Far]:
    end = Far()
    yield end
    end.close()


def spec(port: str) -> LinkSpec:
    return LinkSpec("bus", port)


def descriptors() -> int:
    return len(os.listdir("/proc/self/fd"))


async def taken(far: Far, count: int) -> bytes:
    got = b""
    while len(got) < count:
        try:
            got += os.read(far.master, count - len(got))
        except BlockingIOError:
            await asyncio.sleep(0.001)
    return got


async def test_round_trip_and_all_byte_values_pass(far: Far) -> None:
    link = await open_link(spec(far.name))
    assert isinstance(link, DescriptorLink)
    everything = bytes(range(256))
    await link.write(everything)
    assert await taken(far, 256) == everything
    os.write(far.master, everything)
    got = b""
    while len(got) < 256:
        got += await link.read()
    assert got == everything
    await link.close()


async def test_drain_takes_what_has_arrived_and_never_waits(far: Far) -> None:
    link = await open_link(spec(far.name))
    assert link.drain_input() == b""
    os.write(far.master, b"stale")
    assert link.drain_input() == b"stale"
    assert link.drain_input() == b""
    await link.close()


async def test_draining_just_when_bytes_arrive_is_no_end_of_file(far: Far) -> None:
    link = await open_link(spec(far.name))
    loop = asyncio.get_running_loop()
    os.write(far.master, b"1")
    taken_early: list[bytes] = []
    loop.call_soon(lambda: taken_early.append(link.drain_input()))  # runs before the loop's own reading in this turn
    await asyncio.sleep(0.01)
    os.write(far.master, b"2")
    got = b"".join(taken_early)
    while len(got) < 2:
        got += await asyncio.wait_for(link.read(), 1)
    assert got == b"12"
    await link.close()


async def test_a_cancelled_read_loses_no_byte(far: Far) -> None:
    link = await open_link(spec(far.name))
    reading = asyncio.create_task(link.read())
    await asyncio.sleep(0.01)
    os.write(far.master, b"kept")
    reading.cancel()
    with pytest.raises(asyncio.CancelledError):
        await reading
    assert await link.read() == b"kept"
    await link.close()


async def test_a_second_open_is_refused_and_the_port_named(far: Far) -> None:
    link = await open_link(spec(far.name))
    with pytest.raises(LinkBusy, match=f"{far.name} is in use"):
        await open_link(spec(far.name))
    await link.close()
    again = await open_link(spec(far.name))
    await again.close()


async def test_the_far_end_vanishes_and_a_waiting_reader_hears_at_once(far: Far) -> None:
    link = await open_link(spec(far.name))
    reading = asyncio.create_task(link.read())
    await asyncio.sleep(0.01)
    started = asyncio.get_running_loop().time()
    far.close()
    with pytest.raises(LinkClosed, match="is gone"):
        await reading
    assert asyncio.get_running_loop().time() - started < 0.1
    with pytest.raises(LinkClosed):
        await link.write(b"x")
    with pytest.raises(LinkClosed):
        link.drain_input()
    await link.close()


async def test_the_cable_is_put_back(tmp_path: Path) -> None:
    port, first, second = tmp_path / "port", Far(), Far()
    port.symlink_to(first.name)
    link = await open_link(spec(str(port)))
    first.close()
    with pytest.raises(LinkClosed):
        await link.read()
    await link.close()
    port.unlink()
    with pytest.raises(LinkClosed, match="no such port"):
        await open_link(spec(str(port)))
    port.symlink_to(second.name)
    link = await open_link(spec(str(port)))
    os.write(second.master, b"back")
    assert await link.read() == b"back"
    await link.close()
    second.close()


async def test_a_deaf_end_times_out_and_half_a_command_does_not_follow_later(far: Far) -> None:
    link = await open_link(spec(far.name))
    assert isinstance(link, DescriptorLink)
    link._write_timeout_s = 0.1
    with pytest.raises(LinkTimeout, match="takes no bytes"):
        await link.write(b"z" * 200_000)
    got = b""
    while True:
        try:
            got += os.read(far.master, 65536)
        except BlockingIOError:
            break
    assert len(got) < 8192  # what the system still held was thrown away; the far side's 4 KiB had left
    await link.write(b"{stop}")
    await asyncio.sleep(0.02)
    assert os.read(far.master, 65536).endswith(b"{stop}")
    await link.close()


async def test_no_descriptor_leaks_over_many_opens(far: Far) -> None:
    link = await open_link(spec(far.name))
    await link.close()
    before = descriptors()
    for _ in range(20):
        link = await open_link(spec(far.name))
        with pytest.raises(LinkBusy):
            await open_link(spec(far.name))
        await link.close()
        await link.close()
    assert descriptors() == before


async def test_an_open_that_is_given_up_leaves_the_port_free(far: Far) -> None:
    opening = asyncio.create_task(open_link(spec(far.name)))
    await asyncio.sleep(0)
    opening.cancel()
    with pytest.raises(asyncio.CancelledError):
        await opening
    for _ in range(100):
        try:
            link = await open_link(spec(far.name))
        except LinkBusy:
            await asyncio.sleep(0.01)
        else:
            break
    await link.close()


async def test_after_close_every_call_says_closed(far: Far) -> None:
    link = await open_link(spec(far.name))
    os.write(far.master, b"unread")
    await link.close()
    with pytest.raises(LinkClosed, match="was closed"):
        await link.write(b"x")
    with pytest.raises(LinkClosed, match="was closed"):
        await link.read()
    with pytest.raises(LinkClosed, match="was closed"):
        link.drain_input()


@pytest.mark.parametrize(
    ("port", "kind", "words"),
    [
        ("/dev/does-not-exist", LinkClosed, "no such port"),
        ("/dev/null", LinkClosed, "cannot open port"),
        ("socket://127.0.0.1:1", LinkClosed, "cannot connect"),
        ("socket://nowhere", LinkError, "write socket://host:port"),
        ("nonsense://x", LinkError, "cannot be set up"),
        ("simulated", LinkError, "simulator"),
    ],
)
async def test_ports_that_cannot_be_opened_say_why(port: str, kind: type[LinkError], words: str) -> None:
    with pytest.raises(kind, match=words):
        await open_link(spec(port))


async def test_settings_that_no_port_has_are_told() -> None:
    with pytest.raises(LinkError, match="cannot be set up"):
        await open_link(LinkSpec("bus", "loop://", parity="sometimes"))
