"""Cards against pymodbus's own server in another process: readings, orders, range, the last will."""

from __future__ import annotations

import re
import socket
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from importlib.resources import files
from pathlib import Path

import pytest

from rigd.adapters.open_link import open_link
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import DeviceRefused
from rigd.model.orders import Action, Authority, Order
from rigd.runtime.line import LinkLine
from rigd_drivers.card import FAMILY
from rigd_drivers.card.driver import CardDevice

SERVER = Path(__file__).parents[1] / "fakes/modbus_rig.py"


@contextmanager
def served() -> Iterator[int]:
    with subprocess.Popen([sys.executable, str(SERVER)], stdin=subprocess.PIPE, stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        yield int(process.stdout.readline())
        process.kill()


@pytest.fixture(scope="module")
def port() -> Iterator[int]:
    with served() as number:
        yield number


def device(kind: str, unit: int) -> CardDevice:
    card = str(files("rigd_drivers.card").joinpath("templates", f"modbus-{kind}.toml"))
    made = FAMILY.make(DeviceSpec(kind, "card", "", "bench", str(unit), "unit", (), options={"card": card}))
    assert isinstance(made, CardDevice)
    return made


def order(action: Action, value: float) -> Order:
    return Order(1, "unit", action, value, Authority.SEQUENCE, "test", 0)


async def test_a_whole_rig_by_registers(port: int) -> None:
    link = await open_link(LinkSpec("bench", f"socket://127.0.0.1:{port}"))
    line = LinkLine(link, name="bench", timeout_s=1.0)
    try:
        await device("pump", 1).execute(line, order(Action.DELIVER, 2.0))
        await device("valve", 3).execute(line, order(Action.MOVE, 1.0))
        await device("chiller", 6).execute(line, order(Action.SET_TEMPERATURE, -5.0))
        await device("chiller", 6).execute(line, order(Action.CIRCULATE, 1.0))
        found = {
            (kind, one.channel): one.value
            for kind, unit in (("pump", 1), ("valve", 3), ("chiller", 6), ("sensor", 7))
            for one in await device(kind, unit).poll(line, list(device(kind, unit).card.channels))
        }
        assert found["pump", "flow"] == 2.0
        assert found["pump", "state"] == 1
        assert found["valve", "position"] == 1
        assert found["chiller", "bath"] == found["chiller", "setpoint"] == -5.0
        assert found["sensor", "p1"] == pytest.approx(1.0)
        assert found["sensor", "t1"] == pytest.approx(-5.0)
        with pytest.raises(DeviceRefused, match=r"outside 0 to 10"):
            await device("pump", 1).execute(line, order(Action.DELIVER, 11.0))
    finally:
        await link.close()


def test_the_last_will_stops_the_pump(port: int) -> None:
    will = device("pump", 1).last_will(LinkSpec("bench", f"socket://127.0.0.1:{port}"))
    with socket.create_connection(("127.0.0.1", port), timeout=2) as peer:
        for frame in (*will.frames, *will.check):
            peer.sendall(frame.request)
            assert re.search(frame.good_reply, peer.recv(300), re.DOTALL)
