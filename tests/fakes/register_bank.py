"""A Modbus TCP device in memory: tables of registers and a hook that acts on writes. Also the line to it."""

from __future__ import annotations

import struct
from collections.abc import Callable
from typing import TypeVar

from rigd.model.errors import LinkTimeout
from rigd.ports.link import ReplyReader

T = TypeVar("T")


class RegisterBank:
    """``holes`` are addresses that the device does not have; ``log`` holds (function, address, values) of writes."""

    def __init__(self, acts: Callable[[RegisterBank], None] = lambda bank: None) -> None:
        self.words = {3: dict.fromkeys(range(65536), 0), 4: dict.fromkeys(range(65536), 0)}
        self.bits = {1: dict.fromkeys(range(65536), 0), 2: dict.fromkeys(range(65536), 0)}
        self.holes: set[int] = set()
        self.log: list[tuple[int, int, tuple[int, ...]]] = []
        self.exchanges = 0
        self.busy = 0
        self._acts = acts

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        number, _, _, unit = struct.unpack(">HHHB", request[:7])
        reply = self.answer(request[7:])
        found = reader.feed(struct.pack(">HHHB", number, 0, len(reply) + 1, unit) + reply)
        if found is None:
            raise LinkTimeout("no reply")
        return found

    def answer(self, pdu: bytes) -> bytes:
        """The reply PDU of a request PDU."""
        self.exchanges += 1
        function, address, count = struct.unpack(">BHH", pdu[:5])
        if self.busy:
            self.busy -= 1
            return bytes([function | 0x80, 6])
        if function < 5:
            if self.holes & set(range(address, address + count)):
                return bytes([function | 0x80, 2])
            return self._read(function, address, count)
        self._write(function, address, count, pdu[6:] if function > 6 and function != 22 else pdu[3:])
        self._acts(self)
        return pdu if function == 22 else pdu[:5]

    def _read(self, function: int, address: int, count: int) -> bytes:
        if function > 2:
            body = b"".join(struct.pack(">H", self.words[function][address + n] & 0xFFFF) for n in range(count))
        else:
            packed = sum(self.bits[function][address + n] << n for n in range(count))
            body = packed.to_bytes(-(-count // 8), "little")
        return bytes([function, len(body)]) + body

    def _write(self, function: int, address: int, count: int, data: bytes) -> None:
        if function in (5, 15):
            values = [int(count == 0xFF00)] if function == 5 else [data[n // 8] >> n % 8 & 1 for n in range(count)]
            self.bits[1].update(enumerate(values, address))
        elif function == 22:
            keep, change = struct.unpack(">HH", data)
            values = [self.words[3][address] & keep | change & ~keep]
            self.words[3][address] = values[0]
        else:
            values = [count] if function == 6 else list(struct.unpack(f">{count}H", data))
            self.words[3].update(enumerate(values, address))
        self.log.append((function, address, tuple(values)))
