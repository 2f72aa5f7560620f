"""Cards over real links: Modbus RTU and ASCII before pymodbus's own serial server on a pseudo-terminal; a bridge that
speaks RFC 2217 (``serial.rfc2217.PortManager``, as pyserial's own example of a server does); a socket.
"""

from __future__ import annotations

import asyncio
import os
import socket
import subprocess
import sys
import threading
import tty
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import pytest
from serial import Serial, rfc2217, serial_for_url

from rigd.adapters.open_link import open_link
from rigd.adapters.serial_link import as_the_port_can
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.orders import Action, Authority, Order
from rigd.runtime.line import LinkLine
from rigd_drivers.card.driver import CardDevice

SERVER = """
import asyncio, sys
from pymodbus import FramerType
from pymodbus.server import ModbusSerialServer
from pymodbus.simulator import DataType, SimData, SimDevice

async def serve():
    block = [SimData(0, count=40, values=0, datatype=DataType.REGISTERS)]
    server = ModbusSerialServer(SimDevice(7, block), framer=FramerType(sys.argv[2]), port=sys.argv[1], baudrate=19200)
    await server.serve_forever(background=True)
    print("ready", flush=True)
    await asyncio.get_running_loop().run_in_executor(None, sys.stdin.read)

asyncio.run(serve())
"""
CARD = """
schema = "rigd-card-1"
title = "a pump on a serial line"
family = "pump"
continuous = true
[link]
protocol = "modbus-{kind}"
[registers]
rate = {{ table = "holding", address = 0, type = "f32", word_order = "low-first" }}
run = {{ table = "holding", address = 2, bit = 5, write = "mask" }}
word = {{ table = "holding", address = 2 }}
[channels]
flow = {{ read = "rate * run" }}
delivered = {{ integral_of = "flow" }}
state = {{ read = "run" }}
[orders.deliver]
steps = [{{ write = "rate" }}, {{ write = "run", set = 1 }}]
[stop]
steps = [{{ write = "run", set = 0 }}]
check = [{{ read = "{proof}", equals = 0 }}]
"""


@contextmanager
def wire() -> Iterator[tuple[str, str]]:
    """Two pseudo-terminals joined end to end: the names of both."""
    (one, end_one), (other, end_other) = os.openpty(), os.openpty()
    for end in (end_one, end_other):
        tty.setraw(end)
    stop = threading.Event()

    def carry(source: int, target: int) -> None:
        while not stop.is_set():
            try:
                os.write(target, os.read(source, 4096))
            except OSError:
                return

    for pair in ((one, other), (other, one)):
        threading.Thread(target=carry, args=pair, daemon=True).start()
    try:
        yield os.ttyname(end_one), os.ttyname(end_other)
    finally:
        stop.set()
        for end in (end_one, end_other):
            os.write(end, b"\0")  # wakes the carriers
        for end in (one, other, end_one, end_other):
            os.close(end)


@contextmanager
def served(port: str, framer: str) -> Iterator[None]:
    words = [sys.executable, "-c", SERVER, port, framer]
    with subprocess.Popen(words, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) as server:
        assert server.stdout is not None
        assert server.stdout.readline() == "ready\n"
        try:
            yield
        finally:
            server.kill()


def device(folder: Path, kind: str, proof: str = "run") -> CardDevice:
    path = folder / "pump.toml"
    path.write_text(CARD.format(kind=kind, proof=proof), encoding="utf-8")
    return CardDevice(DeviceSpec("p", "card", "", "bench", "7", "u", (), options={"card": str(path)}))


async def talk(made: CardDevice, port: str) -> list[float]:
    """Deliver, read, then the last will as the guard sends it; what was read."""
    link = await open_link(LinkSpec("bench", port, baud=19200))
    try:
        line = LinkLine(link, name="bench", timeout_s=2.0)
        await made.execute(line, Order(1, "u", Action.DELIVER, 0.25, Authority.SEQUENCE, "test", 0))
        return [one.value for one in await made.poll(line, ["flow", "state"])]
    finally:
        await link.close()


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "proof"), [("rtu", "run"), ("ascii", "word")])
def test_a_serial_line_before_another_librarys_server(kind: str, proof: str, tmp_path: Path) -> None:
    from rigd.guard.wills import _exchange

    made = device(tmp_path, kind, proof)
    with wire() as (near, far), served(far, kind):
        assert asyncio.run(talk(made, near)) == [0.25, 1.0]
        will = made.last_will(LinkSpec("bench", near, reply_timeout_s=2.0))
        with serial_for_url(near, baudrate=19200, timeout=0.02) as port:
            for frame in (*will.frames, *will.check):
                facts = {"request": frame.request.hex(), "good_reply": frame.good_reply.hex(), "timeout_s": 2.0}
                assert _exchange(port, facts) == ""


class NoModem(Serial):
    """A pseudo-terminal has no modem lines."""

    cts = dsr = ri = cd = rts = dtr = False


def bridge(server: socket.socket, name: str) -> None:
    """One client of RFC 2217 to a serial port, by pyserial's own port manager."""
    peer, _ = server.accept()
    with peer, NoModem(name, baudrate=19200, timeout=0.02) as port:

        class Connection:
            def write(self, data: bytes) -> None:
                peer.sendall(data)

        manager = rfc2217.PortManager(port, Connection())

        def to_client() -> None:
            with suppress(OSError, TypeError):  # TypeError: pyserial's port closed under a read
                while port.is_open:
                    peer.sendall(b"".join(manager.escape(port.read(256))))

        reader = threading.Thread(target=to_client, daemon=True)
        reader.start()
        while data := peer.recv(256):
            port.write(b"".join(manager.filter(data)))
        port.close()
        reader.join(1)


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore:set(Daemon|Name):DeprecationWarning")  # inside pyserial 3.5
def test_a_bridge_that_speaks_rfc_2217(tmp_path: Path) -> None:
    made = device(tmp_path, "rtu")
    with wire() as (near, far), served(far, "rtu"), socket.create_server(("127.0.0.1", 0)) as server:
        threading.Thread(target=bridge, args=(server, near), daemon=True).start()
        assert asyncio.run(talk(made, f"rfc2217://127.0.0.1:{server.getsockname()[1]}")) == [0.25, 1.0]


async def test_a_pseudo_terminal_has_no_parity(tmp_path: Path) -> None:
    """And each time it is opened anew; asking one for seven bits with parity fails."""
    master, slave = os.openpty()
    spec = LinkSpec("bench", os.ttyname(slave), baud=4800, data_bits=7, parity="even", stop_bits=2.0)
    try:
        for _ in range(3):
            link = await open_link(spec)
            await link.write(b"A\xff")
            assert os.read(master, 10) == b"A\xff"
            await link.close()
        asked = as_the_port_can(spec)  # the guard's plan takes the same
        assert (asked.data_bits, asked.parity, asked.stop_bits) == (8, "none", 1.0)
    finally:
        os.close(master)
        os.close(slave)
