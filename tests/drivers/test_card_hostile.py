"""A million hostile bytes for each codec of the card engine: chance, bent frames, torn ones, whole ones of others.

Each bent frame has exactly one wrong bit before its end mark: every checksum here finds that (sums, exclusive or and
CRCs alike), so whatever is returned at all is a wrong value. A checksum's digits may come in either case.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from dataclasses import replace

import pytest

from rigd.model.errors import DeviceProtocolError, DeviceRefused
from rigd.ports.link import ReplyReader
from rigd_drivers.card import modbus
from rigd_drivers.card.frames import CHECKSUMS, Frame
from rigd_drivers.card.text import Expected, TextReader

pytestmark = pytest.mark.slow

WORDS = "F250.0 V1.250 RUN"
EXPECTED = Expected(r"F(?P<flow>\d+\.\d) V\d+\.\d+ (?:RUN|HALT)", {"E1": "out of range"})
BYTES = 1_000_000

PLAIN = Frame(b":", b"07", (b"\r\n",))
FRAMES = {
    **{kind: replace(PLAIN, checksum=kind) for kind in CHECKSUMS},
    "etx": Frame(b"\x02", b"07", (b"",), "sum", "hex", "both", b"\x03"),
    "binary": Frame(b"\x02", b"07", (b"\r",), "crc16-modbus", "high-first"),
    "length": Frame(b"~", b"07", (b"",), "crc8", "high-first", length="byte"),
    "length-text": Frame(b"~", b"07", (b"\n",), "crc-ccitt", "decimal", length="decimal3", length_adds=2),
    "prompts": Frame(b"", b"07", (b":", b">", b"*"), "lrc", "hex-lower", keep_end=False),
    "sized": Frame(b"#", b"07", (b"",), "xor", "low-first", size=2 + len(WORDS)),
}


def hostile(make: Callable[[], ReplyReader[object]], right: bytes, foreign: bytes, seed: str) -> None:
    """Feed a reader of one request; it never returns, and starts anew when it calls a frame wrong."""
    chance, reader, fed = random.Random(seed), make(), 0
    while fed < BYTES:
        bent = bytearray(right)
        at = chance.randrange(8 * (len(bent) - 2))
        bent[at // 8] ^= 1 << at % 8
        if bytes(bent).upper() == right.upper():
            continue
        torn = right[:-3] + b"\x00"  # which no later byte completes
        data = chance.choice((chance.randbytes(chance.randrange(1, 400)), bytes(bent), foreign, torn))
        fed += len(data)
        try:
            found = reader.feed(data)
        except (DeviceProtocolError, DeviceRefused):
            found, reader = None, make()
        assert found is None, data
        if chance.random() < 0.2:
            reader = make()
    assert make().feed(right) is not None


@pytest.mark.parametrize("name", FRAMES)
def test_text(name: str) -> None:
    frame = FRAMES[name]
    foreign = replace(frame, address=b"08").wrap(WORDS)
    hostile(lambda: TextReader(frame, EXPECTED), frame.wrap(WORDS), foreign, name)


@pytest.mark.parametrize("protocol", ["modbus-tcp", "modbus-rtu", "modbus-ascii"])
def test_modbus(protocol: str) -> None:
    place = modbus.Place("input", 0, "f32")
    request, reply = modbus.read_pdu(place), modbus.read_reply(place, 0.25)
    right, foreign = (modbus.wrap(unit, 9, reply, protocol) for unit in (7, 8))
    if protocol == "modbus-tcp":  # no checksum: TCP has one; a bent head is somebody else's
        right = right[:7] + bytes([4, 9]) + reply[2:]
        with pytest.raises(DeviceProtocolError):
            modbus.ModbusReader(7, 9, request, protocol).feed(right)
        hostile_tcp(request)
        return
    hostile(lambda: modbus.ModbusReader(7, 9, request, protocol), right, foreign, protocol)


def hostile_tcp(request: bytes) -> None:
    chance, fed = random.Random("tcp"), 0
    while fed < BYTES:
        data = chance.randbytes(chance.randrange(1, 400))
        fed += len(data)
        try:
            assert modbus.ModbusReader(7, 9, request, "modbus-tcp").feed(data) is None
        except (DeviceProtocolError, DeviceRefused):
            continue
