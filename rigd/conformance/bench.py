"""What the battery works with: a case; a bench that joins driver, line and peer in memory; a line that bends bytes."""

from __future__ import annotations

import asyncio
import contextlib
import inspect
import math
from collections.abc import AsyncIterator, Awaitable, Callable, Iterable, Mapping
from dataclasses import dataclass, field
from random import Random
from typing import Any, Protocol, TypeVar

from rigd.adapters.memory_link import Hook, MemoryLink, memory_pair, untouched
from rigd.model.devices import DeviceSpec
from rigd.model.errors import LinkClosed
from rigd.model.orders import Action, Authority, Order
from rigd.model.samples import Reading
from rigd.ports.driver import Driver, DriverFamily
from rigd.ports.link import Line
from rigd.runtime.line import LinkLine
from rigd.runtime.virtual_time import VirtualLoop

T = TypeVar("T")

TIMEOUT_S = 0.04


class Peer(Protocol):
    """A device in memory. ``carried_out`` lists what it did, in its own words."""

    carried_out: list[str]

    def feed(self, data: bytes) -> bytes:
        """Take bytes from the line, return the bytes of the answers."""


@dataclass(frozen=True)
class DriverCase:
    """A family and all that the battery needs to know about it.

    ``orders``: an example value for every action. ``stop``: the actions that make it safe. ``moved`` changes a peer so
    that other values are read and it does not look safe. ``meaning`` strips what counts up (numbers, checksums) from
    request bytes. ``checked``: replies carry number and checksum, so that late and bent ones must be seen. ``foreign``:
    a whole reply of another device. ``channels``: those to poll, if not all. ``exchanged`` gives the peer another
    serial number, as if the cable was put into another device; ``simulated``: the peer says that it is simulated.
    """

    family: DriverFamily
    spec: DeviceSpec
    peer: Callable[[], Any]
    moved: Callable[[Any], None]
    meaning: Callable[[bytes], str]
    orders: Mapping[Action, float] = field(default_factory=dict)
    stop: tuple[Action, ...] = ()
    checked: bool = True
    foreign: bytes = b""
    channels: tuple[str, ...] = ()
    exchanged: Callable[[Any], None] | None = None
    simulated: bool = False

    @property
    def read(self) -> tuple[str, ...]:
        """The channels to poll."""
        return self.channels or self.family.channels


class Bench:
    """A driver, a line and a peer; ``requests`` is what the driver sent; ``deaf`` makes the peer hear nothing."""

    def __init__(self, case: DriverCase, back: Hook = untouched) -> None:
        self.peer: Any = case.peer()
        self.driver: Driver = case.family.make(case.spec)
        self.requests: list[bytes] = []
        self.deaf = False
        self.near: MemoryLink
        self.near, self.far = memory_pair(back=back)
        self.line: Line = LinkLine(self.near, name="bench", timeout_s=TIMEOUT_S, trace=self._note)
        self._serving = asyncio.create_task(self._serve())

    async def ready(self) -> Bench:
        """Identified and prepared."""
        await self.driver.identify(self.line)
        await self.driver.prepare(self.line)
        return self

    async def values(self, case: DriverCase) -> dict[str, tuple[float | None, str]]:
        """What a poll of all channels says, comparable."""
        return comparable(await self.driver.poll(self.line, case.read))

    async def close(self) -> None:
        """End the peer."""
        self._serving.cancel()
        with contextlib.suppress(asyncio.CancelledError, LinkClosed):
            await self._serving
        await self.near.close()

    def _note(self, sent: bool, data: bytes) -> None:
        if sent:
            self.requests.append(data)

    async def _serve(self) -> None:
        while True:
            data = await self.far.read()
            answer = b"" if self.deaf else self.peer.feed(data)
            if answer:
                await self.far.write(answer)


@contextlib.asynccontextmanager
async def bench(case: DriverCase, back: Hook = untouched) -> AsyncIterator[Bench]:
    """A bench that is closed at the end."""
    one = Bench(case, back)
    try:
        yield one
    finally:
        await one.close()


def order(action: Action, value: float) -> Order:
    """An order by nobody in particular."""
    return Order(1, "unit", action, value, Authority.SEQUENCE, "battery", 0)


def comparable(readings: Iterable[Reading]) -> dict[str, tuple[float | None, str]]:
    """Values by channel; not-a-number is None so that it equals itself."""
    return {r.channel: (None if math.isnan(r.value) else r.value, r.fault) for r in readings}


def run(work: Awaitable[T]) -> T:
    """One loop, with a clock that jumps, for one example."""

    async def whole() -> T:
        return await work

    with asyncio.Runner(loop_factory=VirtualLoop) as runner:
        return runner.run(whole())


def virtually(test: Callable[..., Awaitable[None]]) -> Callable[[Any], None]:
    """Make an ``async def test(self)``, or ``test(self, ready)`` that wants a bench, a test in virtual time."""
    wants_bench = "ready" in inspect.signature(test).parameters

    async def with_bench(self: Any) -> None:
        async with bench(self.case) as one:
            await test(self, await one.ready())

    def plain(self: Any) -> None:
        run(with_bench(self) if wants_bench else test(self))

    plain.__name__, plain.__doc__ = test.__name__, test.__doc__
    return plain


def bent(seed: int, data: bytes, case: DriverCase) -> list[tuple[float, bytes]]:
    """One of the things that lines do to bytes, chosen by ``seed``."""
    chance = Random(seed)
    at = chance.randrange(len(data))
    kinds: list[list[tuple[float, bytes]]] = [
        [(0, data)],
        [],  # lost
        [(0, data[:at])],  # torn: the end is missing
        [(0, data[at:])],  # torn: the beginning is missing
        [(0, data[:at] + data[at + 1 :])],  # one byte lost
        [(0, data), (0, data)],  # doubled
        [(1.5 * TIMEOUT_S, data)],  # too late
        [(0, case.foreign + data)],
        [(0, bytes(chance.randrange(256) for _ in range(30)) + data)],  # noise before
        [(0, data[:at]), (0.5 * TIMEOUT_S, data[at:])],  # slow
    ]
    if case.checked:
        kinds.append([(0, data[:at] + bytes([data[at] ^ 1 << chance.randrange(8)]) + data[at + 1 :])])
        kinds.append([(0, bytes(chance.randrange(32, 127) for _ in data))])
    return kinds[chance.randrange(len(kinds))]
