"""A served rig over real pseudo-terminals and sockets: clients come, go and are killed; control; clean ends."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import replace
from pathlib import Path

import pytest
import serial
from fakes.emulated import request
from fakes.small_rig import PLAIN, small_rig

from rigd.adapters import sim_client
from rigd.model.errors import DoorError, LinkBusy
from rigd.ports.plant import FaultSpec, SimulatorOptions
from rigd_sim.bench import control, server
from rigd_sim.bench.meeting import Meeting

STATUS = request("11", "01", "status?")


def read_text(path: Path) -> str:
    """A file's text, "" without a file."""
    return path.read_text() if path.exists() else ""


def wait_for(true: Callable[[], object], limit_s: float = 5.0) -> None:
    """Wait until something is true."""
    end_s = time.monotonic() + limit_s
    while not true():
        assert time.monotonic() < end_s, "waited in vain"
        time.sleep(0.005)


@contextmanager
def served(folder: Path, pace: float = 1.0, transport: str = "pty", **more: object) -> Iterator[dict[str, str]]:
    """Serve the small rig from a thread; gives the ports."""
    options = SimulatorOptions(str(folder), pace, transport, quiet=True)
    options = replace(options, **more)  # type: ignore[arg-type]
    codes: list[int] = []
    thread = threading.Thread(target=lambda: codes.append(server.serve(small_rig(), options, PLAIN)), daemon=True)
    thread.start()
    try:
        wait_for(lambda: f'"pid": {os.getpid()},' in read_text(folder / "ports.json"))
        yield json.loads((folder / "ports.json").read_text())["ports"]
    finally:
        if (folder / "sim.sock").exists():
            control.ask(folder, {"do": "stop"})
        thread.join(5)
    assert codes == [0]
    assert not (folder / "ports.json").exists()
    assert not (folder / "sim.sock").exists()


def opened(port: str) -> serial.SerialBase:
    """A port as a driver would open it."""
    return serial.serial_for_url(port, baudrate=115200, timeout=2)


def ask(port: serial.SerialBase, frame: bytes) -> str:
    """One exchange."""
    port.write(frame)
    return str(port.readline().decode())


@pytest.mark.parametrize("transport", ["pty", "tcp"])
@pytest.mark.parametrize("pace", [1.0, 50.0])
def test_a_serial_client_talks_to_every_device(tmp_path: Path, pace: float, transport: str) -> None:
    with served(tmp_path, pace, transport) as ports:
        with opened(ports["bus"]) as bus, opened(ports["port"]) as port:
            assert ask(bus, request("11", "07", "who?")).startswith("(1107 ok bench SP2 SIM-pump")
            assert ask(bus, request("21", "08", "at?")).startswith("(2108 ok at=1)")
            assert ask(port, b"ID\r") == "CB-1 SIM-chiller 1.0 SIMULATED\r\n"
        facts = json.loads((tmp_path / "ports.json").read_text())
        assert (facts["rig"], facts["pid"], facts["pace"]) == ("small", os.getpid(), pace)


def test_process_time_runs_with_the_pace_and_without_a_client(tmp_path: Path) -> None:
    with served(tmp_path, 50.0) as ports:
        with opened(ports["bus"]) as bus:
            ask(bus, request("11", "01", "rate 3.0"))
        start_s, before = time.monotonic(), control.ask(tmp_path, {"do": "truth"})
        time.sleep(0.4)
        after = control.ask(tmp_path, {"do": "truth"})
        span_s = time.monotonic() - start_s
        passed_s = after["t_s"] - before["t_s"]
        assert 0.4 * 50 <= passed_s <= span_s * 50
        # a pump at 3 mL/min goes on by itself: 0.05 mL per process second
        assert before["truth"]["level:P"] - after["truth"]["level:P"] == pytest.approx(passed_s * 0.05, rel=1e-3)


@pytest.mark.parametrize("transport", ["pty", "tcp"])
def test_a_port_survives_clients_that_leave_and_return(tmp_path: Path, transport: str) -> None:
    with served(tmp_path, 50.0, transport) as ports:
        for _ in range(4):
            with opened(ports["bus"]) as bus:
                assert "state=" in ask(bus, STATUS)
                bus.write(b"{1101 sta")


@pytest.mark.parametrize("transport", ["pty", "tcp"])
def test_a_killed_client_does_not_stop_the_pump_and_the_next_one_is_served(tmp_path: Path, transport: str) -> None:
    code = (
        "import serial, sys, time\n"
        "own = {} if '://' in sys.argv[1] else {'exclusive': True}\n"
        "port = serial.serial_for_url(sys.argv[1], timeout=2, **own)\n"
        "port.write(bytes.fromhex(sys.argv[2])); print(port.readline(), flush=True); time.sleep(60)\n"
    )
    with served(tmp_path, 10.0, transport) as ports:
        arguments = [ports["bus"], request("11", "01", "rate 1.0").hex()]
        client = subprocess.Popen([sys.executable, "-c", code, *arguments], stdout=subprocess.PIPE, text=True)
        try:
            assert client.stdout is not None
            assert "(1101 ok)" in client.stdout.readline()
        finally:
            client.kill()
            client.communicate()
        with opened(ports["bus"]) as bus:
            assert "state=delivering" in ask(bus, request("11", "02", "status?"))
            assert " ok)" in ask(bus, request("00", "03", "stop") + request("11", "03", "stop"))
            assert "state=stopped" in ask(bus, request("11", "04", "status?"))


def test_a_second_tcp_master_is_turned_away_while_the_first_lives(tmp_path: Path) -> None:
    with served(tmp_path, transport="tcp") as ports:
        address = ("127.0.0.1", int(ports["bus"].rsplit(":", 1)[1]))
        with socket.create_connection(address, 2) as first, socket.create_connection(address, 2) as second:
            second.settimeout(2)
            assert second.recv(10) == b""
            first.sendall(STATUS)
            assert first.recv(200).startswith(b"(1101 ok")


@pytest.mark.parametrize("transport", ["pty", "tcp"])
def test_the_server_ends_well_while_a_client_is_connected(tmp_path: Path, transport: str) -> None:
    with served(tmp_path, transport=transport) as ports:
        bus = opened(ports["bus"])
        assert "state=stopped" in ask(bus, STATUS)
    bus.close()


def test_a_client_that_never_reads_does_not_block_the_server(tmp_path: Path) -> None:
    with served(tmp_path, 50.0) as ports:
        deaf = os.open(ports["bus"], os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
        try:
            for _ in range(300):
                try:
                    os.write(deaf, STATUS)
                except BlockingIOError:
                    time.sleep(0.001)
            with opened(ports["port"]) as port:
                assert ask(port, b"RUN\r") == "RUN 0\r\n"
        finally:
            os.close(deaf)


def test_the_time_out_of_a_device_acts_when_the_master_falls_silent(tmp_path: Path) -> None:
    with served(tmp_path) as ports:
        with opened(ports["bus"]) as bus:
            assert " ok)" in ask(bus, request("11", "01", "silence 0.3"))
            assert " ok)" in ask(bus, request("11", "02", "rate 5.0"))
        time.sleep(0.5)
        first = control.ask(tmp_path, {"do": "truth"})["truth"]
        time.sleep(0.2)
        assert control.ask(tmp_path, {"do": "truth"})["truth"] == first


def test_control_lines(tmp_path: Path) -> None:
    planned = (FaultSpec("known", "anything", 5.0),)
    with served(tmp_path, 20.0, faults=planned) as ports, opened(ports["bus"]) as bus:
        ask_sim: Callable[[dict[str, object]], dict[str, object]] = lambda line: sim_client.ask(tmp_path, line)  # noqa: E731
        assert ask_sim({"do": "fault", "kind": "device-silent", "target": "pump"})["onset_s"] > 0  # type: ignore[operator]
        bus.timeout = 0.1
        assert ask(bus, STATUS) == ""
        active = ask_sim({"do": "faults"})["active"]
        assert [fault["kind"] for fault in active] == ["known", "device-silent"]  # type: ignore[attr-defined]
        assert active[1]["duration_s"] is None  # type: ignore[index]
        assert ask_sim({"do": "clear", "kind": "device-silent", "target": "pump"}) == {"ended": 1}
        assert "state=stopped" in ask(bus, request("11", "02", "status?"))
        ask_sim({"do": "fault", "kind": "device-mute", "target": "pump", "duration_s": 1, "after_s": 0})
        time.sleep(0.1)
        assert "state=stopped" in ask(bus, request("11", "03", "status?"))
        kinds = {kind["kind"] for kind in ask_sim({"do": "faults"})["kinds"]}  # type: ignore[attr-defined]
        assert {"known", "line-dead", "device-reboot"} <= kinds


@pytest.mark.parametrize(
    ("line", "why"),
    [
        ({"do": "dance"}, "fault, clear, truth, faults, stop"),
        ({"do": "fault", "kind": "line-dead"}, "target"),
        ({"do": "fault", "kind": "line-dead", "target": "nowhere"}, "bus, chiller, port, pump, valve"),
        ({"do": "fault", "kind": "unknown", "target": "pump"}, "one of known, line-dead"),
        ({"do": "fault", "kind": "line-dead", "target": "bus", "magnitude": "big"}, "must be a number"),
    ],
)
def test_refused_control_lines_say_why(tmp_path: Path, line: dict[str, object], why: str) -> None:
    with served(tmp_path):
        with pytest.raises(DoorError, match=why):
            sim_client.ask(tmp_path, line)
        with pytest.raises(DoorError, match=why):
            control.ask(tmp_path, line)


def test_garbage_on_the_control_socket_is_answered_or_dropped(tmp_path: Path) -> None:
    with served(tmp_path):
        with socket.socket(socket.AF_UNIX) as door:
            door.connect(str(tmp_path / "sim.sock"))
            door.sendall(b"\xff\x00{]\n[]\n" + b"[" * 60000 + b"\n")
            with door.makefile("rb") as lines:
                assert all(json.loads(lines.readline())["ok"] is False for _ in range(3))
            door.sendall(b"x" * 70_000)
            door.settimeout(2)
            with suppress(ConnectionResetError):
                assert door.recv(10) == b""
        assert control.ask(tmp_path, {"do": "truth"})["ok"]


def test_clients_of_a_simulator_that_is_not_there_are_told_so(tmp_path: Path) -> None:
    with pytest.raises(DoorError, match="start it with: rigd sim"):
        sim_client.ask(tmp_path, {"do": "truth"})
    with pytest.raises(DoorError, match="no simulator answers"):
        control.ask(tmp_path, {"do": "truth"})


def test_a_second_server_refuses_and_names_the_first(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with served(tmp_path):
        assert server.serve(small_rig(), SimulatorOptions(str(tmp_path), quiet=True), PLAIN) == 2
        assert f"process {os.getpid()} already serves" in capsys.readouterr().err
        with pytest.raises(LinkBusy):
            Meeting(str(tmp_path))
        assert (tmp_path / "ports.json").exists()


def test_what_a_killed_server_left_behind_is_replaced(tmp_path: Path) -> None:
    (tmp_path / "ports.json").write_text('{"pid": 1, "ports": {"bus": "/dev/null"}}')
    (tmp_path / "sim.sock").write_text("")
    with served(tmp_path):
        pass


@pytest.mark.parametrize(
    ("options", "why"),
    [
        (SimulatorOptions("", pace=0.0), "pace"),
        (SimulatorOptions("", pace=float("nan")), "pace"),
        (SimulatorOptions("", transport="smoke"), "pty, tcp"),
        (SimulatorOptions("", faults=(FaultSpec("unknown", "x"),)), "there is no fault 'unknown'"),
    ],
)
def test_wrong_options_give_one_sentence_and_leave_nothing(
    tmp_path: Path, options: SimulatorOptions, why: str, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "meeting"
    assert server.serve(small_rig(), replace(options, folder=str(folder), quiet=True), PLAIN) == 2
    assert why in (said := capsys.readouterr().err)
    assert said.count("\n") == 1
    assert not (folder / "ports.json").exists()
