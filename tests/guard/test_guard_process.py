"""The guard as a process of its own: control that crashes, hangs, lies or floods; last wills over a pseudo-terminal."""

from __future__ import annotations

import contextlib
import fcntl
import json
import os
import pty
import select
import signal
import socket
import subprocess
import sys
import textwrap
import threading
import time
import tty
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from rigd.model.ticket import STAGES, Ticket, Window, after_scan, mark, read_ticket

FAKE_CONTROL = """
import os, signal, sys, time
from rigd.model.ticket import Ticket, after_scan
mode, tickets, life = sys.argv[1], int(os.environ["RIGD_TICKET_FD"]), int(os.environ["RIGD_LIFE_FD"])
asked = []
for number in (signal.SIGINT, signal.SIGTERM):
    signal.signal(number, lambda *_: asked.append(1))
signal.pthread_sigmask(signal.SIG_UNBLOCK, (signal.SIGINT, signal.SIGTERM))
proof, scan = 0, 0
def tell():
    global proof, scan
    scan += 1
    proof = after_scan(proof, scan)
    os.write(tickets, Ticket(scan, time.monotonic_ns(), proof).line())
for _ in range(5):
    time.sleep(0.06)
    tell()
if mode == "crash":
    raise SystemExit(3)
if mode == "hang":
    os.kill(os.getpid(), signal.SIGSTOP)
if mode == "wrong":
    proof ^= 1
    tell()
if mode == "skip":
    proof = after_scan(after_scan(proof, scan + 2), scan + 1)
    os.write(tickets, Ticket(scan + 2, time.monotonic_ns(), proof).line())
if mode == "flood":
    while True:
        tell()
if mode == "garbage":
    os.write(tickets, b"hello\\n")
if mode == "signals":
    while len(asked) < 2:
        time.sleep(0.06)
        tell()
    os.write(tickets, b"D 1 stopped as asked\\n")
    raise SystemExit(1)
if mode == "orphan":
    sys.stdout.write(repr(os.read(life, 1)))
    sys.stdout.flush()
    raise SystemExit(0)
if mode == "done":
    os.write(tickets, b"D 0 the sweep is done\\n")
    raise SystemExit(0)
time.sleep(30)
"""


class Peer:
    """A pump on a pseudo-terminal: answers ``stop`` and ``status?``, deaf for the first ``deaf`` requests."""

    def __init__(self, deaf: int = 0) -> None:
        self.master, slave = pty.openpty()
        tty.setraw(self.master)
        self.port = os.ttyname(slave)
        self._slave = slave
        self._deaf = deaf
        self.stopped_at = 0.0
        self.heard = 0
        self.lies = False
        self._over = False
        self._thread = threading.Thread(target=self._serve, daemon=True)
        self._thread.start()

    def close(self) -> None:
        self._over = True
        self._thread.join()
        os.close(self.master)
        os.close(self._slave)

    def _serve(self) -> None:
        data = b""
        while not self._over:
            if not select.select([self.master], [], [], 0.02)[0]:
                continue
            data += os.read(self.master, 1000)
            *lines, data = data.split(b"\n")
            for line in lines:
                self.heard += 1
                if self.heard > self._deaf:
                    self._answer(line)

    def _answer(self, line: bytes) -> None:
        if line == b"stop":
            self.stopped_at = time.monotonic()
            os.write(self.master, b"ok\n")
        elif line == b"status?" and self.lies:
            os.write(self.master, b"delivering\n")
        elif line == b"status?":
            os.write(self.master, b"stopped\n" if self.stopped_at else b"delivering\n")


@pytest.fixture
def peer() -> Iterator[Peer]:
    peer = Peer()
    yield peer
    peer.close()


def plan(folder: Path, mode: str, ports: dict[str, str], **more: Any) -> Path:
    script = folder / "fake_control.py"
    script.write_text(textwrap.dedent(FAKE_CONTROL))
    will = {
        "baud": 115200,
        "data_bits": 8,
        "parity": "none",
        "stop_bits": 1,
        "frames": [{"request": b"stop\n".hex(), "good_reply": rb"ok\n".hex(), "timeout_s": 0.2}],
        "check": [{"request": b"status?\n".hex(), "good_reply": rb"stopped\n".hex(), "timeout_s": 0.2}],
    }
    facts = {
        "folder": str(folder),
        "control": [sys.executable, str(script), mode],
        "helpers": [],
        "after": [],
        "locks": [],
        "cleanup": [],
        "first_s": 10.0,
        "early_s": 0.02,
        "late_s": 1.0,
        "wills": [{"device": device, "port": port, **will} for device, port in ports.items()],
        **more,
    }
    path = folder / "plan.json"
    path.write_text(json.dumps(facts))
    return path


def run_guard(path: Path, **more: Any) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "rigd.guard", str(path)]
    return subprocess.run(command, capture_output=True, text=True, timeout=20, check=False, **more)


def test_an_orderly_end_is_passed_on_and_touches_no_port(tmp_path: Path, peer: Peer) -> None:
    announced = tmp_path / "run-1.json"
    announced.touch()
    done = run_guard(plan(tmp_path, "done", {"pump": peer.port}, cleanup=[str(announced)]))
    assert (done.returncode, done.stderr) == (0, "rigd: the sweep is done\n")
    assert peer.heard == 0
    assert not announced.exists()


@pytest.mark.parametrize(
    ("mode", "words", "seconds"),
    [
        ("crash", "ended without a word", 1.5),
        ("hang", "no sign of life", 2.5),
        ("wrong", "does not prove", 1.5),
        ("skip", "does not prove", 1.5),
        ("flood", "too early", 1.5),
        ("garbage", "no ticket", 1.5),
    ],
)
def test_control_that_fails_is_ended_and_the_rig_stopped(
    tmp_path: Path, peer: Peer, mode: str, words: str, seconds: float
) -> None:
    began = time.monotonic()
    done = run_guard(plan(tmp_path, mode, {"pump": peer.port}))
    assert done.returncode == 1
    assert words in done.stderr
    assert "every device confirmed it" in done.stderr
    assert "Traceback" not in done.stderr
    assert peer.stopped_at - began < seconds + 0.5  # 0.5 s: two Pythons start first
    report = json.loads((tmp_path / "guard.json").read_text())
    assert report["devices"]["pump"]["confirmed"] is True


SLEEPER = """
import sys, time
from rigd.guard.supervise import guard
began = time.monotonic()
raise SystemExit(guard(sys.argv[1], lambda: 40_000_000_000 if time.monotonic() > began + 0.8 else 0))
"""


def test_a_computer_that_slept_has_not_been_watched(tmp_path: Path, peer: Peer) -> None:
    """Boot time runs ahead of monotonic time by 40 s; control knows nothing of it and goes on with good tickets."""
    command = [sys.executable, "-c", SLEEPER, str(plan(tmp_path, "signals", {"pump": peer.port}))]
    done = subprocess.run(command, capture_output=True, text=True, timeout=20, check=False)
    assert done.returncode == 1
    assert "suspended with the computer for 40.0 s" in done.stderr
    assert peer.stopped_at > 0
    assert json.loads((tmp_path / "guard.json").read_text())["devices"]["pump"]["confirmed"] is True


@pytest.mark.parametrize("mode", ["done", "hang"])
def test_the_service_manager_hears_of_a_watched_rig_only_while_it_is_watched(
    tmp_path: Path, peer: Peer, mode: str
) -> None:
    """The datagrams of sd_notify(3); a control that hangs is no reason to say that all is well."""
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as manager:
        manager.bind(str(tmp_path / "notify"))
        manager.settimeout(0.2)
        env = {**os.environ, "NOTIFY_SOCKET": str(tmp_path / "notify"), "WATCHDOG_USEC": "200000"}
        run_guard(plan(tmp_path, mode, {"pump": peer.port}), env=env)
        told = []
        with contextlib.suppress(TimeoutError):
            while True:
                told.append(manager.recv(4096).decode())
    assert told[0].startswith("READY=1")
    assert told[-1].startswith("STOPPING=1")
    assert 3 <= told.count("WATCHDOG=1") <= 5  # five tickets in 0.3 s, told at most each 50 ms


def test_wills_are_repeated_until_a_deaf_pump_confirms(tmp_path: Path, peer: Peer) -> None:
    deaf = Peer(deaf=5)
    try:
        done = run_guard(plan(tmp_path, "crash", {"deaf": deaf.port, "good": peer.port}))
    finally:
        deaf.close()
    assert done.returncode == 1
    report = json.loads((tmp_path / "guard.json").read_text())
    assert report["devices"]["deaf"]["attempts"] > 1
    assert report["devices"]["good"]["attempts"] == 1
    assert deaf.stopped_at > peer.stopped_at > 0


def test_drive_power_is_taken_away_only_when_a_pump_does_not_confirm(tmp_path: Path, peer: Peer) -> None:
    """The pump says "ok" and goes on delivering; the enable output is told after three rounds, not before."""
    enable, liar = Peer(), Peer()
    liar.lies = True
    path = plan(tmp_path, "crash", {"enable": enable.port, "liar": liar.port, "good": peer.port})
    facts = json.loads(path.read_text())
    facts["wills"][0]["last_resort"] = True
    path.write_text(json.dumps(facts))
    with subprocess.Popen([sys.executable, "-m", "rigd.guard", str(path)], stderr=subprocess.PIPE, text=True) as guard:
        while not enable.stopped_at:
            time.sleep(0.02)
        assert liar.heard >= 6
        assert peer.stopped_at > 0
        assert enable.stopped_at - peer.stopped_at < 3.0
        liar.lies = False  # without power it stands still at last
        assert guard.stderr is not None
        said = guard.stderr.read()
        assert "every device confirmed it" in said
    for one in (enable, liar):
        one.close()
    devices = json.loads((tmp_path / "guard.json").read_text())["devices"]
    assert (devices["enable"]["confirmed"], devices["liar"]["confirmed"]) == (True, True)
    assert "enable: drive power taken away, confirmed" in (tmp_path / "guard.log").read_text()


def test_a_program_that_locked_the_port_does_not_keep_a_stop_from_the_wire(tmp_path: Path, peer: Peer) -> None:
    with open(peer.port, "rb", buffering=0) as taken:
        fcntl.flock(taken, fcntl.LOCK_EX | fcntl.LOCK_NB)
        done = run_guard(plan(tmp_path, "crash", {"pump": peer.port}))
    assert "every device confirmed it" in done.stderr
    assert peer.stopped_at > 0


def test_drive_power_stays_when_every_pump_confirms(tmp_path: Path, peer: Peer) -> None:
    enable = Peer()
    path = plan(tmp_path, "crash", {"good": peer.port, "enable": enable.port})
    facts = json.loads(path.read_text())
    facts["wills"][1]["last_resort"] = True
    path.write_text(json.dumps(facts))
    done = run_guard(path)
    enable.close()
    assert "every device confirmed it" in done.stderr
    assert enable.heard == 0
    assert set(json.loads((tmp_path / "guard.json").read_text())["devices"]) == {"good"}


def test_a_device_that_never_confirms_is_named_when_a_person_gives_up(tmp_path: Path, peer: Peer) -> None:
    path = plan(tmp_path, "crash", {"gone": str(tmp_path / "no-port"), "good": peer.port})
    with subprocess.Popen([sys.executable, "-m", "rigd.guard", str(path)], stderr=subprocess.PIPE, text=True) as guard:
        while not peer.stopped_at:
            time.sleep(0.02)
        time.sleep(0.5)
        assert guard.poll() is None
        for _ in range(2):
            guard.send_signal(signal.SIGINT)
            time.sleep(0.1)
        assert guard.stderr is not None
        assert "NOT CONFIRMED as stopped: gone. Stop them by hand" in guard.stderr.read()
        assert guard.wait(10) == 1


def test_signals_are_handed_on_and_end_nothing_by_themselves(tmp_path: Path, peer: Peer) -> None:
    path = plan(tmp_path, "signals", {"pump": peer.port})
    with subprocess.Popen([sys.executable, "-m", "rigd.guard", str(path)], stderr=subprocess.PIPE, text=True) as guard:
        time.sleep(1.0)
        guard.send_signal(signal.SIGHUP)
        guard.send_signal(signal.SIGINT)
        time.sleep(0.3)
        assert guard.poll() is None
        guard.send_signal(signal.SIGTERM)
        assert guard.stderr is not None
        assert guard.stderr.read() == "rigd: stopped as asked\n"
        assert guard.wait(10) == 1
    assert peer.heard == 0


def test_a_control_that_ends_before_its_first_scan_has_nothing_to_report(tmp_path: Path) -> None:
    path = plan(tmp_path, "done", {}, after=[sys.executable, "-c", "print('after')"])
    facts = json.loads(path.read_text())
    path.write_text(json.dumps({**facts, "control": [sys.executable, "-c", "raise SystemExit(1)"]}))
    done = run_guard(path)
    assert (done.returncode, done.stdout) == (1, "")
    assert "ended without a word" in done.stderr


def test_control_sees_the_end_of_a_killed_guard(tmp_path: Path) -> None:
    path = plan(tmp_path, "orphan", {})
    with subprocess.Popen([sys.executable, "-m", "rigd.guard", str(path)]) as guard:
        time.sleep(0.8)
        guard.kill()
    for _ in range(100):
        if (tmp_path / "control.log").read_text() == "b''":
            return
        time.sleep(0.05)
    pytest.fail("control did not notice that its guard is gone")


def test_a_helper_that_cannot_start_or_dies_changes_nothing(tmp_path: Path) -> None:
    helpers = [
        {"name": "front", "argv": ["/does/not/exist"], "shown": False},
        {"name": "progress", "argv": [sys.executable, "-c", "raise SystemExit(9)"], "shown": True},
    ]
    after = [sys.executable, "-c", "print('after')"]
    done = run_guard(plan(tmp_path, "done", {}, helpers=helpers, after=after))
    assert (done.returncode, done.stdout) == (0, "after\n")


def chain(count: int) -> list[int]:
    proofs = [0]
    for scan in range(1, count + 1):
        proofs.append(after_scan(proofs[-1], scan))
    return proofs


def test_a_ticket_covers_the_scans_before_it_and_any_other_order_of_stages_fails() -> None:
    proofs = chain(10)
    now_ns = time.monotonic_ns()
    window = Window(5.0, 0.05, 1.0, now_ns)
    assert window.judge(Ticket(1, now_ns, proofs[1]), now_ns) == ""
    assert window.judge(Ticket(10, now_ns + 60_000_000, proofs[10]), now_ns + 60_000_000) == ""
    for left_out in STAGES:
        proof = proofs[1]
        for stage in STAGES:
            proof = proof if stage == left_out else mark(proof, 2, stage)
        other = Window(5.0, 0.05, 1.0, now_ns)
        assert other.judge(Ticket(1, now_ns, proofs[1]), now_ns) == ""
        assert "prove" in other.judge(Ticket(2, now_ns + 100_000_000, proof), now_ns + 100_000_000)


def test_repeated_old_and_future_tickets_fail() -> None:
    proofs, now_ns = chain(3), time.monotonic_ns()
    for ticket, words in (
        (Ticket(2, now_ns + 100_000_000, proofs[2]), "does not follow"),
        (Ticket(3, now_ns + 10_000_000_000, proofs[3]), "future"),
    ):
        window = Window(5.0, 0.05, 1.0, now_ns)
        assert window.judge(Ticket(2, now_ns, proofs[2]), now_ns) == ""
        assert words in window.judge(ticket, now_ns + 100_000_000)


@pytest.mark.parametrize("line", [b"", b"T 1 2", b"T 1 2 3 4", b"T -1 2 3", b"T x 2 3", b"\xff\xfe"])
def test_what_is_no_ticket_is_none(line: bytes) -> None:
    assert read_ticket(line) is None


def test_a_ticket_survives_its_line() -> None:
    assert read_ticket(Ticket(7, 8, 9).line().strip()) == Ticket(7, 8, 9)
