"""A whole rig over Modbus TCP through cards alone, live: a trip and the last wills stop the pumps.

The peer is pymodbus's own server in another process (``fakes/modbus_rig.py``).
"""

from __future__ import annotations

import os
import re
import shutil
import signal
import socket
import struct
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from importlib.resources import files
from pathlib import Path

import pytest
from fakes.config_files import CONFIGS

SERVER = Path(__file__).parents[1] / "fakes/modbus_rig.py"
DEVICES = {
    "pump-a": ("pump", 1), "pump-b": ("pump", 2), "valve-a": ("valve", 3), "valve-b": ("valve", 4),
    "valve-c": ("valve", 5), "chiller": ("chiller", 6), "sensors": ("sensor", 7),
}  # fmt: skip

pytestmark = pytest.mark.slow


def write_rig(folder: Path, port: int) -> tuple[Path, Path]:
    """The example rig without its detector and second sensors, every device a card; a recipe without leak test."""
    shutil.copytree(CONFIGS / "chemistry", folder / "chemistry")
    (folder / "rigs").mkdir()
    for kind in ("pump", "valve", "chiller", "sensor"):
        name = f"modbus-{kind}.toml"
        text = files("rigd_drivers.card").joinpath("templates", name).read_text(encoding="utf-8")
        (folder / "rigs" / name).write_text(text, encoding="utf-8")
    text = (CONFIGS / "rigs/two-pump-column.toml").read_text(encoding="utf-8")
    text = text[: text.index("[[links]]")].replace('to = "IR"', 'to = "BPR"')
    gone = ("[[cells]]", 'id = "L-3"', 'tag = "PT-2"\ntitle', 'tag = "TT-2"\ntitle')
    blocks = re.split(r"(?m)^(?=\[)", text)
    text = "".join(block for block in blocks if not any(word in block for word in gone))
    text = text.replace(', { tag = "PT-2", above = "8 bar" }', "").replace("1oo2", "1oo1").replace("TT-2", "TT-1")
    text += f'[[links]]\nid = "bench"\nport = "socket://127.0.0.1:{port}"\n'
    for name, (kind, unit) in DEVICES.items():
        text += (
            f'\n[[devices]]\nid = "{name}"\ndriver = "card"\nlink = "bench"\naddress = "{unit}"\nperiod = "500 ms"\n'
        )
        text += f'options = {{ card = "modbus-{kind}.toml" }}\n'
    rig, recipe = folder / "rigs/rig.toml", folder / "recipe.toml"
    rig.write_text(text, encoding="utf-8")
    text = (CONFIGS / "recipes/demo-sweep.toml").read_text(encoding="utf-8")
    text = text.replace('"IR.conversion"\ntolerance = "1 %"', '"TT-1"\ntolerance = "1 K"')
    recipe.write_text(re.sub(r"(?ms)^\[leak_test\].*?(?=^\[)", "", text), encoding="utf-8")
    return rig, recipe


class Peer:
    """A second master at the server: looks at registers, makes a clog."""

    def __init__(self, port: int) -> None:
        self._port = port

    def ask(self, unit: int, function: int, address: int, number: int) -> bytes:
        with socket.create_connection(("127.0.0.1", self._port), timeout=2) as peer:
            peer.sendall(struct.pack(">HHHBBHH", 1, 0, 6, unit, function, address, number))
            return peer.recv(300)[9:]

    def running(self) -> list[int]:
        return [int.from_bytes(self.ask(unit, 3, 2, 1), "big") for unit in (1, 2)]

    def wait_for(self, wanted: list[int], within_s: float) -> None:
        end_s = time.monotonic() + within_s
        while self.running() != wanted:
            assert time.monotonic() < end_s, f"pumps {self.running()}, waited for {wanted}"
            time.sleep(0.1)


@contextmanager
def live(folder: Path) -> Iterator[tuple[Peer, subprocess.Popen[bytes]]]:
    pipe = subprocess.PIPE
    with subprocess.Popen([sys.executable, str(SERVER)], stdin=pipe, stdout=pipe) as server:
        assert server.stdout is not None
        port = int(server.stdout.readline())
        rig, recipe = write_rig(folder, port)
        words = [sys.executable, "-m", "rigd", "run", str(rig), str(recipe), "--sign", "demo", "--runs"]
        with subprocess.Popen([*words, str(folder / "runs")], stdout=pipe, stderr=subprocess.STDOUT) as run:
            try:
                peer = Peer(port)
                peer.wait_for([1, 1], 30.0)
                yield peer, run
            finally:
                run.terminate()
                run.wait(20)
                server.kill()


def test_a_trip_stops_the_pumps(tmp_path: Path) -> None:
    with live(tmp_path) as (peer, run):
        peer.ask(7, 6, 50, 1)
        peer.wait_for([0, 0], 3.0)
        assert b"PRESSURE-HIGH" in run.communicate(timeout=30)[0]


def test_the_guard_stops_the_pumps_when_control_is_killed(tmp_path: Path) -> None:
    with live(tmp_path) as (peer, run):
        children = Path(f"/proc/{run.pid}/task/{run.pid}/children").read_text(encoding="ascii").split()
        control = [one for one in children if b"control" in Path(f"/proc/{one}/cmdline").read_bytes()]
        os.kill(int(control[0]), signal.SIGKILL)
        peer.wait_for([0, 0], 5.0)
