"""What devices on protocol cards cost: round trips a second, and processor time of 20 devices on 4 ports at 10 Hz.

The devices are plain servers in another process on TCP: two ports of Modbus (five units each), two of text (five
addresses each). The floor says the same bytes with bare sockets on the same event loop.
"""

from __future__ import annotations

import asyncio
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from importlib.resources import files
from pathlib import Path
from time import process_time

from bench.figures import Figure, Scale

from rigd.adapters.open_link import open_link
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.runtime.line import LinkLine
from rigd_drivers.card.driver import CardDevice

SERVER = """
import asyncio, struct, sys
async def modbus(reader, writer):
    while head := await reader.read(12):
        number, _, _, unit, function, _, count = struct.unpack(">HHHBBHH", head)
        writer.write(struct.pack(">HHHBBB", number, 0, 3 + 2 * count, unit, function, 2 * count) + bytes(2 * count))
async def text(reader, writer):
    while said := await reader.read(20):
        writer.write(b"#" + said[1:3] + b"F250.0 V1.250 RUN\\r\\n")
async def serve():
    servers = [await asyncio.start_server(kind, "127.0.0.1", 0) for kind in (modbus, modbus, text, text)]
    print(*[server.sockets[0].getsockname()[1] for server in servers], flush=True)
    await asyncio.get_running_loop().run_in_executor(None, sys.stdin.read)
asyncio.run(serve())
"""
PERIOD_S = 0.1
PER_PORT = 5
KINDS = ("modbus", "modbus", "text", "text")
CHANNELS = ("flow", "state")
FLOOR = "the same bytes on bare sockets"
REQUESTS = {"modbus": bytes.fromhex("000100000006010400000003"), "text": b"@01ST?\r"}


def cards_figures(scale: Scale) -> Iterator[Figure]:
    """Round trips a second on one port, and processor time of a device at 10 Hz."""
    seconds = scale.pick(1, 10, 60)
    with served() as ports, tempfile.TemporaryDirectory(prefix="rigd-") as name:
        devices = [card_devices(Path(name), kind) for kind in KINDS]
        for at, kind in ((0, "modbus"), (2, "text")):
            floor_per_s = asyncio.run(bare_trips(ports[at], REQUESTS[kind], seconds / 4))
            trips_per_s = asyncio.run(card_trips(ports[at], devices[at][0], seconds / 4))
            yield Figure(
                f"cards.{kind}",
                f"round trips of a {kind} card, one TCP port",
                "1/s",
                trips_per_s,
                floor_per_s,
                FLOOR,
                note="one poll of a pump: flow and state; the peer is another process",
            )
        floor_percent = asyncio.run(at_10_Hz(ports, [], seconds / 2))
        percent = asyncio.run(at_10_Hz(ports, devices, seconds))
        yield Figure(
            "cards.processor",
            "a device on a card at 10 Hz, processor",
            "% of a core",
            percent / 20,
            floor_percent / 20,
            FLOOR,
            note=f"20 devices on 4 ports: {percent:.1f} % in all, over {seconds} s",
        )


@contextmanager
def served() -> Iterator[list[int]]:
    with subprocess.Popen([sys.executable, "-c", SERVER], stdin=subprocess.PIPE, stdout=subprocess.PIPE) as server:
        assert server.stdout is not None
        try:
            yield [int(word) for word in server.stdout.readline().split()]
        finally:
            server.kill()


def card_devices(folder: Path, kind: str) -> list[CardDevice]:
    name = f"{kind}-pump.toml"
    text = files("rigd_drivers.card").joinpath("templates", name).read_text(encoding="utf-8")
    (folder / name).write_text(text, encoding="utf-8")
    options = {"card": str(folder / name)}
    return [
        CardDevice(DeviceSpec(f"p{n}", "card", "", "bench", f"{n:02d}", f"u{n}", (), options=options))
        for n in range(1, PER_PORT + 1)
    ]


async def card_trips(port: int, device: CardDevice, seconds: float) -> float:
    link = await open_link(LinkSpec("bench", f"socket://127.0.0.1:{port}"))
    line, trips, end_s = LinkLine(link, name="bench", timeout_s=1.0), 0, time.monotonic() + seconds
    while time.monotonic() < end_s:
        await device.poll(line, CHANNELS)
        trips += 1
    await link.close()
    return trips / seconds


async def bare_trips(port: int, request: bytes, seconds: float) -> float:
    reader, writer = await asyncio.open_connection("127.0.0.1", port)
    trips, end_s = 0, time.monotonic() + seconds
    while time.monotonic() < end_s:
        writer.write(request)
        await reader.read(300)
        trips += 1
    writer.close()
    return trips / seconds


async def at_10_Hz(ports: Sequence[int], devices: Sequence[Sequence[CardDevice]], seconds: float) -> float:
    """Processor time [% of a core] of all ports at once; without devices that of bare sockets."""
    jobs = [_polled(port, row, seconds) for port, row in zip(ports, devices, strict=True)] if devices else [
        _bare(port, REQUESTS[kind], seconds) for port, kind in zip(ports, KINDS, strict=True)
    ]  # fmt: skip
    before_s = process_time()
    await asyncio.gather(*jobs)
    return 100.0 * (process_time() - before_s) / seconds


async def _polled(port: int, devices: Sequence[CardDevice], seconds: float) -> None:
    link = await open_link(LinkSpec("bench", f"socket://127.0.0.1:{port}"))
    line, start_s = LinkLine(link, name="bench", timeout_s=1.0), time.monotonic()
    for turn in range(round(seconds / PERIOD_S)):
        await asyncio.sleep(max(0.0, start_s + turn * PERIOD_S - time.monotonic()))
        for device in devices:
            await device.poll(line, CHANNELS)
    await link.close()


async def _bare(port: int, request: bytes, seconds: float) -> None:
    reader, writer = await asyncio.open_connection("127.0.0.1", port)
    start_s = time.monotonic()
    for turn in range(round(seconds / PERIOD_S)):
        await asyncio.sleep(max(0.0, start_s + turn * PERIOD_S - time.monotonic()))
        for _ in range(PER_PORT):
            writer.write(request)
            await reader.read(300)
    writer.close()
