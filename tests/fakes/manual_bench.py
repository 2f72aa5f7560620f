"""The four devices of configs/cards/MANUAL.md before the simulated plant, played by the manual. Run as a program.

``python manual_bench.py RIG`` prints its ports as JSON (``pumps`` and ``map`` over TCP, ``chiller`` a terminal), then
serves in real time until standard input ends. The line ``block`` on standard input blocks the column, ``state`` prints
what the pumps truly do. Pumps have the addresses 07 and 08, valves V-A, V-B, V-C the numbers 1 to 3.
"""

from __future__ import annotations

import asyncio
import json
import os
import sys
import time
import tty
from collections.abc import Callable
from functools import partial

from pymodbus.server import ModbusTcpServer
from pymodbus.simulator import DataType, SimData, SimDevice

from rigd.adapters.plugins import plant_maker
from rigd.config.load import load_rig
from rigd.model.orders import Action
from rigd.ports.plant import FaultSpec, Plant

VALVES = ("V-A", "V-B", "V-C")
PUMPS = {"07": ("PU-A", "pump-a"), "08": ("PU-B", "pump-b")}
STATES = {0: "H", 1: "R", 2: "R", 3: "B", 4: "E"}


class Bench:
    """The plant in real time."""

    def __init__(self, plant: Plant) -> None:
        self.plant, self._start_s = plant, time.monotonic()

    def now(self) -> float:
        now_s = time.monotonic() - self._start_s
        self.plant.advance(round(now_s * 1e9))
        return now_s

    def tell(self, unit: str, action: Action, value: float = 0.0) -> str:
        self.now()
        return self.plant.tell(unit, action, value)

    def read(self, device: str, *channels: str) -> list[float]:
        self.now()
        return [one.value for one in self.plant.read(device, channels)]


class PumpD2:
    """Section 1 of the manual."""

    def __init__(self, bench: Bench, unit: str, device: str) -> None:
        self.bench, self.unit, self.device = bench, unit, device
        self.rate_uL, self.watch_s, self.heard_s = 0, 0, 0.0

    def answer(self, text: str) -> str:
        self.heard_s = self.bench.now()
        level, standby, delivered, state = self.bench.read(self.device, "level", "standby", "delivered", "state")
        name, _, number = text.partition("=")
        if text == "I":
            return "D2 sn=00417 v=1.3"
        if text == "?":
            volumes = f"a={round(level * 1e3):05d} b={round(standby * 1e3):05d} t={round(delivered * 1e4):010d}"
            return f"s={STATES[int(state)]} r={self.rate_uL:05d} {volumes}"
        if text == "W":
            return f"W={self.watch_s:02d}"
        if name == "W":
            self.watch_s = int(number)
            return "ok"
        if name == "R":
            if len(number) != 5 or not 5 <= int(number) <= 20000:
                return "er 3"
            self.rate_uL = int(number)
            return self._tell(Action.DELIVER, self.rate_uL / 1e3) if int(state) == 1 else "ok"
        if name == "F":
            return "bz" if self.bench.tell(self.unit, Action.FILL, int(number) / 1e3) else "ok"
        if text in ("G", "C"):
            return self._tell(Action.DELIVER if text == "G" else Action.SWAP, self.rate_uL / 1e3)
        return self._tell(Action.STOP, 0.0) if text == "H" else "er 1"

    def _tell(self, action: Action, value: float) -> str:
        return "er 4" if self.bench.tell(self.unit, action, value) else "ok"

    def supervise(self) -> None:
        if self.watch_s and self.bench.now() - self.heard_s > self.watch_s:
            self.bench.tell(self.unit, Action.STOP)


async def serve_pumps(pumps: dict[str, PumpD2], reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
    while True:
        try:
            message = await reader.readuntil(b"\r")
        except asyncio.IncompleteReadError:
            writer.close()
            return
        body, _, check = message[:-1].decode("ascii", "replace").rpartition(":")[2].rpartition("*")
        if f"{-sum(body.encode()) & 0xFF:02X}" == check and body[:2] in pumps:
            reply = body[:2] + pumps[body[:2]].answer(body[2:])
            writer.write(f";{reply}*{-sum(reply.encode()) & 0xFF:02X}\r".encode())


class CoolerK1:
    """Section 2 of the manual."""

    def __init__(self, bench: Bench) -> None:
        self.bench, self.remote, self.restarted = bench, False, True

    def answer(self, text: str) -> str:
        bath, setpoint, on = self.bench.read("chiller", "bath", "setpoint", "circulating")
        if text == "L1":
            self.remote = True
        elif text == "Z":
            self.restarted = False
        elif text[:1] in ("S", "P") and len(text) > 1:
            if not self.remote:
                return "!L"
            number = float(text[1:])
            if text[0] == "S" and not -2000 <= number <= 9500:
                return "!R"
            action = Action.SET_TEMPERATURE if text[0] == "S" else Action.CIRCULATE
            self.bench.tell("CH", action, number / 100 if text[0] == "S" else number)
        word = int(on) | self.remote << 7 | self.restarted << 15
        known = {"N": "K1/0088", "T": f"{round(bath * 100):+05d}", "S": f"{round(setpoint * 100):+05d}"}
        return {**known, "X": f"{word:04X}"}.get(text, "")


def serve_cooler(cooler: CoolerK1, master: int) -> None:
    """One read of the pseudo-terminal; commands end with LF."""
    for line in os.read(master, 4096).decode("ascii", "replace").split("\n")[:-1]:
        os.write(master, f"{line}\n{cooler.answer(line)}\r\n>".encode())


class Maps:
    """Sections 3 and 4 of the manual."""

    def __init__(self, bench: Bench) -> None:
        self.bench, self.coils = bench, dict.fromkeys(range(80), 0)

    async def island(
        self, function: int, start: int, address: int, count: int, now: list[int], values: list[int] | None
    ) -> None:
        if values is not None and function in (5, 15):
            self.coils.update(enumerate(map(int, values), address))
            for n, unit in enumerate(VALVES, 1):
                on = [k for k in range(4) if self.coils[10 * n + k]]
                if len(on) == 1 and address in range(10 * n, 10 * n + 4):
                    self.bench.tell(unit, Action.MOVE, float(on[0]))
        elif function == 2:
            for word in range(len(now)):
                now[word] = 0
            for n, unit in enumerate(VALVES, 1):
                (position,) = self.bench.read(f"valve-{unit[-1].lower()}", "position")
                bit = 10 * n + int(position)
                if position >= 0:
                    now[bit // 16 - start] |= 1 << bit % 16

    async def inputs(
        self, function: int, start: int, address: int, count: int, now: list[int], values: list[int] | None
    ) -> None:
        pressure, temperature = self.bench.read("sensors", "p1", "t1")
        for n, share in enumerate((pressure / 25, (temperature + 50) / 200)):
            now[n - start] = round((4 + 16 * share) * 30000 / 20)


def device(unit: int, action: Callable[..., object]) -> SimDevice:
    bits = [SimData(0, count=80, values=False, datatype=DataType.BITS)]
    words = [SimData(0, count=80, values=0, datatype=DataType.REGISTERS)]
    return SimDevice(unit, (bits, bits, words, words), action=action)  # type: ignore[arg-type]


async def serve(rig_path: str) -> None:
    rig = load_rig(rig_path)
    plant_maker().make(rig, 1).advance(10**9)  # compiles the physics before time counts
    bench = Bench(plant_maker().make(rig, 1))
    pumps = {address: PumpD2(bench, *names) for address, names in PUMPS.items()}
    line = await asyncio.start_server(partial(serve_pumps, pumps), "127.0.0.1", 0)
    master, slave = os.openpty()
    tty.setraw(slave)
    asyncio.get_running_loop().add_reader(master, serve_cooler, CoolerK1(bench), master)
    maps = Maps(bench)
    server = ModbusTcpServer([device(11, maps.island), device(20, maps.inputs)], address=("127.0.0.1", 0))
    await server.serve_forever(background=True)
    assert server.transport is not None
    ports = {"pumps": line.sockets[0].getsockname()[1], "map": server.transport.sockets[0].getsockname()[1]}
    print(json.dumps({**ports, "chiller": os.ttyname(slave)}), flush=True)
    asyncio.get_running_loop().add_reader(sys.stdin, heard, bench)
    while True:
        await asyncio.sleep(0.05)
        bench.now()
        for pump in pumps.values():
            pump.supervise()


def heard(bench: Bench) -> None:
    """Words from standard input, one a line; its end ends the program."""
    said = os.read(0, 4096).decode().split()
    for word in said:
        if word == "block":
            bench.plant.inject(FaultSpec("block", "COL", bench.now()))
        elif word == "state":
            states = [bench.read(device, "flow", "state") for _, device in PUMPS.values()]
            print(json.dumps(states), flush=True)
    if not said:
        os._exit(0)


if __name__ == "__main__":
    asyncio.run(serve(sys.argv[1]))
