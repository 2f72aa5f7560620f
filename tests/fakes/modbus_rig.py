"""A rig behind pymodbus's own Modbus TCP server, with simple physics. Run as a program: prints its port, then serves.

Units: 1, 2 pumps; 3, 4, 5 valves; 6 chiller; 7 inputs of 4-20 mA (microamperes). Pressure is 0.5 bar per mL/min, or
15 bar when holding register 50 of unit 7 is set (a clog, written by a test).
"""

from __future__ import annotations

import asyncio
import struct
import sys
from functools import partial

from pymodbus.server import ModbusTcpServer
from pymodbus.simulator import DataType, SimData, SimDevice

HOLDING = {unit: [0] * 64 for unit in range(1, 8)}
COILS = {unit: [0] * 64 for unit in range(1, 8)}


def flow(unit: int) -> float:
    rate: float = struct.unpack(">f", struct.pack(">HH", *HOLDING[unit][:2]))[0]
    return rate if HOLDING[unit][2] else 0.0


def inputs(unit: int) -> list[int]:
    registers = [0] * 64
    registers[0:2] = struct.unpack(">HH", struct.pack(">f", flow(unit) if unit < 3 else 0.0))
    registers[2] = HOLDING[unit][2]
    registers[10] = max(1, HOLDING[unit][10])
    registers[20] = HOLDING[6][20] if COILS[6][0] else 220
    pressure = 15.0 if HOLDING[7][50] else 0.5 * (flow(1) + flow(2))
    bath = registers[20] - (registers[20] >> 15 << 16)
    registers[30] = round(4000 + pressure / 16 * 16000)
    registers[31] = round(4000 + bath / 10 / 100 * 16000)
    return registers


async def act(
    unit: int, function: int, start: int, address: int, count: int, now: list[int], values: list[int] | None
) -> None:
    if values is not None:
        kept = COILS if function in (5, 15) else HOLDING
        kept[unit][address : address + len(values)] = [int(value) for value in values]
    elif function == 4:
        now[address - start : address - start + count] = inputs(unit)[address : address + count]


def block(kind: DataType) -> list[SimData]:
    return [SimData(0, count=64, values=0 if kind is DataType.REGISTERS else False, datatype=kind)]


async def serve() -> None:
    devices = [
        SimDevice(
            unit,
            (block(DataType.BITS), block(DataType.BITS), block(DataType.REGISTERS), block(DataType.REGISTERS)),
            action=partial(act, unit),
        )
        for unit in range(1, 8)
    ]
    server = ModbusTcpServer(devices, address=("127.0.0.1", 0))
    await server.serve_forever(background=True)
    assert server.transport is not None
    print(server.transport.sockets[0].getsockname()[1], flush=True)
    await asyncio.get_running_loop().run_in_executor(None, sys.stdin.read)


if __name__ == "__main__":
    asyncio.run(serve())
