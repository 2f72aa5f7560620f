"""Text cards in memory; mistakes in cards; hostile bytes."""

from __future__ import annotations

import re
from importlib.resources import files
from pathlib import Path
from typing import TypeVar

import pytest

from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import ConfigError, LinkTimeout
from rigd.model.orders import Action, Authority, Order
from rigd.ports.link import ReplyReader
from rigd_drivers.card import FAMILY
from rigd_drivers.card.frames import CHECKSUMS, Frame

T = TypeVar("T")
CARD = files("rigd_drivers.card").joinpath("templates", "text-pump.toml").read_text(encoding="utf-8")


class Pump:
    """The invented pump of the card, by its samples; also the line to it."""

    def __init__(self) -> None:
        self.rate, self.state = 0.0, "HALT"

    def answer(self, words: str) -> str:
        if words.startswith("FR "):
            self.rate = float(words[3:])
            return "OK"
        if words in ("GO", "HALT"):
            self.state = {"GO": "RUN", "HALT": "HALT"}[words]
            return "OK"
        flow = self.rate if self.state == "RUN" else 0.0
        known = {"ID?": "P1 SN0042", "FR?": f"FR={self.rate:.1f}", "ST?": f"F{flow:.1f} V1.250 {self.state}"}
        return known.get(words, "E1")

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        assert request.startswith(b"@07")
        assert request.endswith(b"\r")
        found = reader.feed(b"#08E1\r\n#07" + self.answer(request[3:-1].decode()).encode() + b"\r\n")
        if found is None:
            raise LinkTimeout("no reply")
        return found


def spec(path: Path) -> DeviceSpec:
    return DeviceSpec("p", "card", "", "bench", "07", "unit", (), options={"card": str(path)})


async def test_an_ascii_pump_from_its_manual(tmp_path: Path) -> None:
    (tmp_path / "p.toml").write_text(CARD, encoding="utf-8")
    driver, pump = FAMILY.make(spec(tmp_path / "p.toml")), Pump()
    assert (await driver.identify(pump)).serial_no == "0042"
    await driver.execute(pump, Order(1, "u", Action.DELIVER, 0.25, Authority.SEQUENCE, "test", 0))
    assert [one.value for one in await driver.poll(pump, ["flow", "state"])] == [0.25, 1.0]
    will = driver.last_will(LinkSpec("bench", "/dev/none"))
    assert will.frames[0].request == b"@07HALT\r"
    assert not re.search(will.check[0].good_reply, b"#07F250.0 V1.250 RUN\r\n", re.DOTALL)
    await driver.execute(pump, Order(2, "u", Action.STOP, 0.0, Authority.CUT, "test", 0))
    reply = b"#07" + pump.answer("ST?").encode() + b"\r\n"
    assert re.search(will.check[0].good_reply, reply, re.DOTALL)


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ('sample = "FR=250.0"', 'sample = "FR 250"', "does not match its sample"),
        ('read = "now.flow"', 'read = "now.flaw"', "not declared"),
        ('unit = "uL/min" }\ndeliv', 'unit = "pints" }\ndeliv', "pints"),
        ('steps = [{ send = "HALT"', 'stepz = [{ send = "HALT"', "stepz"),
    ],
)
def test_mistakes_are_told_with_their_line(tmp_path: Path, old: str, new: str, told: str) -> None:
    assert old in CARD
    (tmp_path / "p.toml").write_text(CARD.replace(old, new), encoding="utf-8")
    with pytest.raises(ConfigError) as caught:
        FAMILY.make(spec(tmp_path / "p.toml"))
    assert told in str(caught.value)
    assert caught.value.problems[0].line > 0


@pytest.mark.parametrize("kind", [*CHECKSUMS, "none"])
def test_a_bent_frame_is_never_believed(kind: str) -> None:
    frame = Frame(b"\x02", b"", (b"\x03",), kind)
    message = frame.wrap("F250.0")
    assert frame.find(message) == ("F250.0", b"")
    assert kind == "none" or frame.find(message.replace(b"5", b"6", 1))[0] is None


async def test_a_reply_that_no_pattern_fits_is_named(tmp_path: Path) -> None:
    (tmp_path / "p.toml").write_text(CARD.replace("RUN|HALT|JAM", "RUN|JAM"), encoding="utf-8")
    driver = FAMILY.make(spec(tmp_path / "p.toml"))
    with pytest.raises(LinkTimeout, match=r"heard 'F0.0 V1.250 HALT', which no pattern of the card fits"):
        await driver.poll(Pump(), ["flow"])


@pytest.mark.parametrize(("heard", "stopped"), [(b"1\r", True), (b"0\r1\r", True), (b"21\r", False), (b"1", False)])
def test_a_last_will_believes_a_whole_answer_only(tmp_path: Path, heard: bytes, stopped: bool) -> None:
    """Where replies have no start mark, "21" is no "1"."""
    text = files("rigd_drivers.card").joinpath("templates", "text-valve.toml").read_text(encoding="utf-8")
    (tmp_path / "v.toml").write_text(text.replace('reply_start = "="', 'reply_start = ""'), encoding="utf-8")
    will = FAMILY.make(spec(tmp_path / "v.toml")).last_will(LinkSpec("bench", "/dev/none"))
    assert [frame.request for frame in will.frames] == [b"/07GO1\r", b""]  # then a second of patience
    assert (re.search(will.check[0].good_reply, heard, re.DOTALL) is not None) is stopped
