"""A tiny device and its driver, for tests of the runtime: one word per line, nothing of the real protocols.

``who`` -> ``me <serial>``; ``ready`` -> ``ready <0|1>`` (restarted); ``read`` -> ``val <x>``; ``do <action>
<value>`` ->
``ok`` or ``no``. The device can be silent, slow or somebody else.
"""

from __future__ import annotations

import asyncio
from collections.abc import Callable, Sequence

from rigd.model.devices import ChannelSpec, DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, DeviceRefused
from rigd.model.orders import Order
from rigd.model.samples import Reading
from rigd.ports.link import Line, Link

MS = 1_000_000


class Words:
    """Reply reader: one line that starts with the expected word."""

    def __init__(self, head: str) -> None:
        self._head, self._data = head, b""

    def feed(self, data: bytes) -> list[str] | None:
        self._data += data
        if b"\n" not in self._data:
            return None
        words = self._data.split(b"\n")[0].decode().split()
        if words[:1] == ["no"]:
            raise DeviceRefused("the device says no")
        if words[:1] != [self._head]:
            raise DeviceProtocolError(f"{words} is no answer")
        return words[1:]


class WordDriver:
    """Implements ``rigd.ports.driver.Driver`` for the device below."""

    def __init__(self, spec: DeviceSpec) -> None:
        self._name = spec.address

    async def identify(self, line: Line) -> DeviceIdentity:
        words = await line.ask(f"{self._name} who\n".encode(), Words("me"))
        return DeviceIdentity("test", "word", words[0], simulated=True)

    async def prepare(self, line: Line) -> bool:
        words = await line.ask(f"{self._name} ready\n".encode(), Words("ready"))
        return words[0] == "1"

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        words = await line.ask(f"{self._name} read\n".encode(), Words("val"))
        return [Reading(channel, float(words[0])) for channel in channels]

    async def execute(self, line: Line, order: Order) -> None:
        await line.ask(f"{self._name} do {order.action.value.split()[0]} {order.value:g}\n".encode(), Words("ok"))

    def last_will(self, link: LinkSpec) -> LastWill:
        return LastWill(self._name, link, ())


class WordDevice:
    """One device on a bus. ``done`` records what it was told, ``heard`` every line to it."""

    def __init__(self, name: str, serial_no: str = "1", delay_s: float = 0.01) -> None:
        self.name, self.serial_no, self.delay_s = name, serial_no, delay_s
        self.silent = False
        self.refusing = False
        self.restarted = False
        self.value = 1.0
        self.done: list[tuple[str, float]] = []
        self.heard: list[str] = []

    def answer(self, words: list[str]) -> str:
        self.heard.append(" ".join(words))
        if words[0] == "who":
            return f"me {self.serial_no}"
        if words[0] == "ready":
            was, self.restarted = self.restarted, False
            return f"ready {int(was)}"
        if words[0] == "read":
            return f"val {self.value:g}"
        if self.refusing:
            return "no"
        self.done.append((words[1], float(words[2])))
        return "ok"


async def serve(link: Link, devices: Sequence[WordDevice], now: Callable[[], float] | None = None) -> None:
    """The far end of a link, until it closes."""
    data = b""
    while True:
        data += await link.read()
        *lines, data = data.split(b"\n")
        for line in lines:
            name, *words = line.decode().split()
            for device in devices:
                if device.name == name and not device.silent:
                    text = device.answer(words)
                    await asyncio.sleep(device.delay_s)
                    await link.write(f"{text}\n".encode())


def spec(name: str, link: str = "bus", period_ms: int = 200, **more: object) -> DeviceSpec:
    """A device with one channel ``x`` read as the tag ``<name>.x``, driving the unit ``U-<name>``."""
    channel = ChannelSpec("x", f"{name}.x", period_ms * MS)
    return DeviceSpec(name, "word", "", link, name, f"U-{name}", (channel,), **more)  # type: ignore[arg-type]
