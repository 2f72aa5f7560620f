"""Whole rigs through cards alone, live and in real time: a sweep runs to its end; trips and last wills stop pumps.

One rig stands behind pymodbus's own server with simple physics, its pumps without syringes; the other one is four
devices of an invented manual (configs/cards/MANUAL.md) before the simulated plant, over TCP and a pseudo-terminal.
"""

from __future__ import annotations

import json
import os
import signal
import socket
import struct
import subprocess
import sys
import time
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Protocol

import pytest
from fakes.card_rigs import manual_rig, modbus_rig

FAKES = Path(__file__).parents[1] / "fakes"
PIPE = subprocess.PIPE

pytestmark = pytest.mark.slow


class Peer(Protocol):
    """Looks at the devices past the daemon, and makes a clog."""

    files: tuple[Path, Path]

    def delivering(self) -> list[bool]: ...

    def clog(self) -> None: ...


class ModbusPeer:
    """A second master at the server."""

    def __init__(self, folder: Path, server: subprocess.Popen[str]) -> None:
        assert server.stdout is not None
        self._port = int(server.stdout.readline())
        self.files = modbus_rig(folder, self._port)

    def ask(self, unit: int, function: int, address: int, number: int) -> bytes:
        with socket.create_connection(("127.0.0.1", self._port), timeout=2) as peer:
            peer.sendall(struct.pack(">HHHBBHH", 1, 0, 6, unit, function, address, number))
            return peer.recv(300)[9:]

    def delivering(self) -> list[bool]:
        return [int.from_bytes(self.ask(unit, 3, 2, 1), "big") == 1 for unit in (1, 2)]

    def clog(self) -> None:
        self.ask(7, 6, 50, 1)


class ManualPeer:
    """Speaks with the program that plays the devices, over its standard input and output."""

    def __init__(self, folder: Path, server: subprocess.Popen[str]) -> None:
        self._server = server
        assert server.stdout is not None
        self.files = manual_rig(folder, json.loads(server.stdout.readline()))

    def _say(self, word: str) -> None:
        assert self._server.stdin is not None
        self._server.stdin.write(f"{word}\n")
        self._server.stdin.flush()

    def delivering(self) -> list[bool]:
        self._say("state")
        assert self._server.stdout is not None
        return [flow > 0 for flow, _ in json.loads(self._server.stdout.readline())]

    def clog(self) -> None:
        self._say("block")


@contextmanager
def bench(kind: str, folder: Path) -> Iterator[Peer]:
    """The devices as a process of their own."""
    words = [sys.executable, str(FAKES / ("modbus_rig.py" if kind == "modbus" else "manual_bench.py"))]
    (folder / "rigs").mkdir(parents=True)
    if kind == "manual":
        words.append(str(manual_rig(folder, {"pumps": 1, "map": 2, "chiller": "/dev/null"})[0]))
    with subprocess.Popen(words, stdin=PIPE, stdout=PIPE, text=True) as server:
        try:
            yield ModbusPeer(folder, server) if kind == "modbus" else ManualPeer(folder, server)
        finally:
            server.kill()


@contextmanager
def running(peer: Peer, folder: Path) -> Iterator[subprocess.Popen[bytes]]:
    rig, recipe = map(str, peer.files)
    words = [sys.executable, "-m", "rigd", "run", rig, recipe, "--sign", "demo", "--runs", str(folder / "runs")]
    with subprocess.Popen(words, stdout=PIPE, stderr=subprocess.STDOUT) as run:
        try:
            yield run
        finally:
            run.terminate()
            run.wait(20)


def wait_for(peer: Peer, moving: bool, within_s: float) -> None:
    """Until any pump delivers, or none does."""
    end_s = time.monotonic() + within_s
    while any(peer.delivering()) is not moving:
        assert time.monotonic() < end_s, f"pumps {peer.delivering()}, waited for {moving}"
        time.sleep(0.1)


def sweep(kind: str, folder: Path) -> tuple[int, str, list[bool], Path]:
    """Exit code, what was said, which pumps still deliver, the record."""
    with bench(kind, folder) as peer:
        with running(peer, folder) as run:
            said = run.communicate(timeout=120)[0].decode()
        return run.returncode, said, peer.delivering(), next((folder / "runs").iterdir())


def killed_then_clogged(kind: str, folder: Path) -> str:
    """Control is killed with signal 9 while the pumps deliver; in a second run the column is blocked. What was said."""
    with bench(kind, folder) as peer:
        with running(peer, folder) as run:
            wait_for(peer, True, 60.0)
            children = Path(f"/proc/{run.pid}/task/{run.pid}/children").read_text(encoding="ascii").split()
            control = [one for one in children if b"control" in Path(f"/proc/{one}/cmdline").read_bytes()]
            os.kill(int(control[0]), signal.SIGKILL)
            wait_for(peer, False, 5.0)
            run.communicate(timeout=30)
        with running(peer, folder / "again") as run:
            wait_for(peer, True, 60.0)
            peer.clog()
            wait_for(peer, False, 10.0)
            return run.communicate(timeout=30)[0].decode()


@pytest.fixture(scope="module")
def found(tmp_path_factory: pytest.TempPathFactory) -> Iterator[dict[str, Future[Any]]]:
    """All four scenarios at the same time: they mostly wait."""
    folder = tmp_path_factory.mktemp("cards")
    with ThreadPoolExecutor(4) as pool:
        yield {
            f"{kind} {what.__name__}": pool.submit(what, kind, folder / f"{kind}-{what.__name__}")
            for kind in ("modbus", "manual")
            for what in (sweep, killed_then_clogged)
        }


@pytest.mark.timeout(200)
@pytest.mark.parametrize("kind", ["modbus", "manual"])
def test_a_sweep_runs_to_its_end_and_its_record_replays(kind: str, found: dict[str, Future[Any]]) -> None:
    code, said, delivering, record = found[f"{kind} sweep"].result()
    assert code == 0, said
    assert "every pump is confirmed stopped" in said
    assert delivering == [False, False]
    subprocess.run([sys.executable, "-m", "rigd", "replay", str(record)], stdout=PIPE, check=True)  # same decisions
    copies = {path.name for path in record.glob("*.toml")}
    assert ("ascii-pump.toml" if kind == "manual" else "modbus-pump.toml") in copies


@pytest.mark.timeout(200)
@pytest.mark.parametrize("kind", ["modbus", "manual"])
def test_last_wills_and_a_trip_stop_the_pumps(kind: str, found: dict[str, Future[Any]]) -> None:
    assert "PRESSURE-HIGH" in found[f"{kind} killed_then_clogged"].result()


def test_a_real_port_cannot_be_paced(tmp_path: Path) -> None:
    (tmp_path / "rigs").mkdir()
    rig, recipe = manual_rig(tmp_path, {"pumps": 1, "map": 2, "chiller": "/dev/null"})
    words = [sys.executable, "-m", "rigd", "run", str(rig), str(recipe), "--pace", "5", "--sign", "demo"]
    refused = subprocess.run(words, stdout=PIPE, stderr=subprocess.STDOUT, check=False)
    assert refused.returncode == 1
    assert b"pace 5 needs a simulated rig" in refused.stdout
