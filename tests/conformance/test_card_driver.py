"""The card engine in the battery: the invented pump D2 of configs/cards/MANUAL.md, played in memory by its manual."""

from __future__ import annotations

import re
import tempfile
from dataclasses import replace
from pathlib import Path
from typing import TypeVar

import pytest
from fakes.config_files import CONFIGS

from rigd.conformance.bench import DriverCase, order
from rigd.conformance.contract import DriverContract
from rigd.model.devices import PUMP_CHANNELS, DeviceSpec
from rigd.model.errors import LinkTimeout
from rigd.model.orders import Action
from rigd.ports.link import ReplyReader
from rigd_drivers.card import FAMILY

T = TypeVar("T")
CARD = str(CONFIGS / "cards/ascii-pump.toml")
_FOLDER = tempfile.TemporaryDirectory(prefix="rigd-card-")


def single() -> str:
    """The same card without ``fill`` and ``swap``: what could be done twice is not said again, see below."""
    text = Path(CARD).read_text(encoding="utf-8")
    head, rest = text.split("[orders.fill]")
    path = Path(_FOLDER.name) / "single.toml"
    path.write_text(head + rest[rest.index("[errors]") :], encoding="utf-8")
    return str(path)


class PumpD2:
    """Address 07; carries out what it is told and counts nothing up."""

    def __init__(self) -> None:
        self.carried_out: list[str] = []
        self.rate_uL, self.state, self.watch_s, self.serial = 0, "H", 0, "00417"
        self.active_uL, self.resting_uL = 4500, 0
        self._kept = b""

    def feed(self, data: bytes) -> bytes:
        *messages, self._kept = (self._kept + data).split(b"\r")
        return b"".join(self._reply(message) for message in messages)

    def _reply(self, message: bytes) -> bytes:
        body, _, check = message.decode("latin-1").rpartition(":")[2].rpartition("*")
        if body[:2] != "07" or f"{-sum(body.encode('latin-1')) & 0xFF:02X}" != check:
            return b""
        reply = "07" + self._answer(body[2:])
        return f";{reply}*{-sum(reply.encode()) & 0xFF:02X}\r".encode()

    def _answer(self, text: str) -> str:
        if text == "I":
            return f"D2 sn={self.serial} v=1.3"
        if text == "W":
            return f"W={self.watch_s:02d}"
        if text == "?":
            volumes = f"a={self.active_uL:05d} b={self.resting_uL:05d} t=0000012500"
            return f"s={self.state} r={self.rate_uL:05d} {volumes}"
        self.carried_out.append(text)
        name, _, number = text.partition("=")
        if name == "R" and not 5 <= int(number) <= 20000:
            return "er 3"
        if name == "R":
            self.rate_uL = int(number)
        elif name == "W":
            self.watch_s = int(number)
        elif name == "F":
            self.resting_uL = int(number)
        elif text == "C":
            self.active_uL, self.resting_uL = self.resting_uL, self.active_uL
        else:
            self.state = {"G": "R", "H": "H"}[text]
        return "ok"


def moved(peer: PumpD2) -> None:
    peer.state, peer.rate_uL, peer.active_uL, peer.resting_uL = "R", 1234, 2000, 1000


def exchanged(peer: PumpD2) -> None:
    peer.serial = "00999"


@pytest.mark.slow
class TestCard(DriverContract):
    case = DriverCase(
        family=replace(FAMILY, channels=PUMP_CHANNELS, actions=(Action.DELIVER, Action.STOP)),
        spec=DeviceSpec("pump", "card", "", "bench", "07", "PU", (), options={"card": single()}),
        peer=PumpD2,
        moved=moved,
        meaning=lambda data: re.sub(r"^:07|\*..\r$", "", data.decode("latin-1")),
        orders={Action.DELIVER: 0.25, Action.STOP: 0.0},
        stop=(Action.STOP,),
        checked=False,
        foreign=b";08s=R r=00001 a=00001 b=00001 t=0000000001*E4\r",
        exchanged=exchanged,
    )


class NoReply:
    """A line on which no reply comes back."""

    def __init__(self) -> None:
        self.asked: list[bytes] = []

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        self.asked.append(request)
        raise LinkTimeout("no reply")


@pytest.mark.parametrize(("action", "times"), [(Action.SWAP, 1), (Action.FILL, 1), (Action.DELIVER, 3)])
async def test_what_could_be_done_twice_is_said_once(action: Action, times: int) -> None:
    line = NoReply()
    with pytest.raises(LinkTimeout):
        await FAMILY.make(replace(TestCard.case.spec, options={"card": CARD})).execute(line, order(action, 1.0))
    assert len(line.asked) == times
