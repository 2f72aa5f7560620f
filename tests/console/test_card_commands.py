"""``rigd card`` and ``rigd ports`` before a small device on TCP; ``card try`` by hand on a pseudo-terminal."""

from __future__ import annotations

import json
import os
import pty
import re
import socketserver
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from importlib.resources import files
from pathlib import Path
from typing import ClassVar

import pytest
from fakes.card_rigs import manual_rig

from rigd.console.checking import check_files
from rigd.console.cli import call
from rigd.model.errors import ConfigError

RIGD = (sys.executable, "-m", "rigd")


class TextPump(socketserver.BaseRequestHandler):
    """The invented pump of the template ``text-pump``, address 07."""

    heard: ClassVar[list[str]] = []

    def handle(self) -> None:
        kept = b""
        while data := self.request.recv(100):
            kept += data
            while b"\r" in kept:
                message, kept = kept.split(b"\r", 1)
                words = message.decode().removeprefix("@07")
                self.heard.append(words)
                known = {"ID?": "P1 SN0042", "ST?": "F0.0 V1.250 HALT", "HALT": "OK"}
                self.request.sendall(f"#07{known.get(words, 'E1')}\r\n".encode())


@pytest.fixture
def port() -> Iterator[str]:
    TextPump.heard.clear()
    with socketserver.ThreadingTCPServer(("127.0.0.1", 0), TextPump) as server:
        server.daemon_threads = True
        threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.02}, daemon=True).start()
        yield f"socket://127.0.0.1:{server.server_address[1]}"
        server.shutdown()


@pytest.fixture
def card(tmp_path: Path) -> str:
    text = files("rigd_drivers.card").joinpath("templates", "text-pump.toml").read_text(encoding="utf-8")
    (tmp_path / "pump.toml").write_text(text, encoding="utf-8")
    return str(tmp_path / "pump.toml")


def rigd(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([*RIGD, *words], capture_output=True, text=True, timeout=30, check=False)


def test_what_was_tried_becomes_the_test_of_the_card(card: str, port: str, tmp_path: Path) -> None:
    saved = str(tmp_path / "pump.transcript")
    found = rigd("card", "try", port, card, "--address", "07", "--save", saved, "--order", "stop", "0", "--json")
    assert found.returncode == 0, found.stderr
    assert json.loads(found.stdout)["acts"]["poll"]["delivered"] == "1.25"
    assert re.search(r"ms > 40 30 37 49 44 3f 0d  \|@07ID\?\.\|", found.stderr)
    assert "and as in" in rigd("card", "check", card).stdout
    text = Path(card).read_text(encoding="utf-8")
    Path(card).write_text(text.replace('send = "HALT"', 'send = "STOP"'), encoding="utf-8")
    told = rigd("card", "check", card)
    assert told.returncode == 1
    assert r'"@07STOP\r"' in told.stdout


def test_a_card_is_never_overwritten_and_its_mistakes_are_told(card: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert call(["card", "new", "text-pump", card]) == 2
    assert call(["card", "new", "text-pump", f"{card}.new"]) == 0
    assert Path(f"{card}.new").read_text(encoding="utf-8") == Path(card).read_text(encoding="utf-8")
    Path(card).write_text(
        Path(card).read_text(encoding="utf-8").replace("[stop]\nsteps", "[stop]\nstep"), encoding="utf-8"
    )
    assert call(["card", "check", card]) == 2
    told = capsys.readouterr()
    assert "did you mean 'steps'" in told.out + told.err


def test_ports_asks_who_is_there_and_nothing_else(card: str, port: str) -> None:
    found = json.loads(rigd("ports", port, "socket://127.0.0.1:1", "--card", card, "--address", "07", "--json").stdout)
    answers = [one["answers"]["pump.toml"] for one in found["ports"]]
    assert answers[0] == "invented P-1 0042"
    assert answers[1].startswith("no: ")
    assert TextPump.heard == ["ID?"]


@pytest.mark.slow
def test_by_hand_on_a_terminal(card: str, port: str, tmp_path: Path) -> None:
    saved = tmp_path / "hand.transcript"
    master, slave = pty.openpty()
    words = [*RIGD, "card", "try", port, card, "--address", "07", "--save", str(saved)]
    with subprocess.Popen(words, stdin=slave, stdout=slave, stderr=slave) as process:
        os.close(slave)
        said = b""
        for line in (b"help\n", b"poll delivered\n", b"send XX\n", b"deliver 99\n", b"quit\n"):
            said += until(master, b"card> ")
            os.write(master, line)
        said += until(master, b"saved:")
        assert process.wait(10) == 0
    os.close(master)
    assert b"delivered = 1.25" in said
    assert b"#07E1" in said
    assert b"99 is outside 0 to 5" in said
    assert "? poll delivered\n" in saved.read_text(encoding="utf-8")
    assert rigd("card", "check", card, "--transcript", str(saved)).returncode == 0


def until(descriptor: int, wanted: bytes) -> bytes:
    heard, end_s = b"", time.monotonic() + 20
    while wanted not in heard:
        assert time.monotonic() < end_s, heard
        heard += os.read(descriptor, 4096)
    return heard


def test_check_tells_what_is_wrong_with_all_cards_of_a_rig(tmp_path: Path) -> None:
    (tmp_path / "rigs").mkdir()
    rig, recipe = manual_rig(tmp_path, {"pumps": 1, "map": 2, "chiller": "/dev/null"})
    check_files(rig, recipe)
    card = tmp_path / "rigs/ascii-pump.toml"
    card.write_text(card.read_text(encoding="utf-8").replace('"lrc"', '"lcr"'), encoding="utf-8")
    (tmp_path / "rigs/ascii-chiller.toml").unlink()
    rig.write_text(rig.read_text(encoding="utf-8").replace('channel = "p1"', 'channel = "p9"'), encoding="utf-8")
    with pytest.raises(ConfigError) as caught:
        check_files(rig, recipe)
    told = [str(problem) for problem in caught.value.problems]
    assert len(told) == 3
    assert "ascii-pump.toml:16: framing.checksum" in told[0]
    assert "did you mean 'p1'" in told[1]
    assert "cannot be read" in told[2]
