"""The example rig in another process: real bytes, true pressure, signals, rates."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
import serial
from fakes.emulated import request
from fakes.sim_process import SimProcess, sim_process

REQUESTS_PER_S_LEAST = 150
"""At pace 30, pressures at 5 Hz of process time alone need as many."""


class Bus:
    """A master on one port."""

    def __init__(self, sim: SimProcess, link: str) -> None:
        self.port = serial.serial_for_url(sim.ports[link], timeout=2)
        self._number = 0

    def ask(self, address: str, words: str) -> str:
        """One exchange; the words of the reply."""
        self._number = (self._number + 1) % 256
        self.port.write(request(address, f"{self._number:02X}", words))
        reply = str(self.port.readline().decode())
        assert reply.startswith(f"({address}{self._number:02X} "), reply
        return reply[6 : reply.rindex(")")]


def pressure_bar(bus: Bus) -> float:
    """What the module shows before the column."""
    found = re.search(r"p1=(-?[\d.]+)/", bus.ask("31", "read? p1"))
    assert found
    return float(found[1])


def wait_process(sim: SimProcess, span_s: float) -> None:
    """Let so much process time pass."""
    end_s = sim.ask("truth")["t_s"] + span_s
    while sim.ask("truth")["t_s"] < end_s:
        time.sleep(0.01)


def deliver(sim: SimProcess, bus: Bus, rate_mL_min: float) -> None:
    """Fill both pumps and let them deliver."""
    for address in ("11", "12"):
        assert bus.ask(address, "fill 5") == "ok"
    wait_process(sim, 40)
    for address in ("11", "12"):
        assert bus.ask(address, f"rate {rate_mL_min}") == "ok"


@pytest.mark.parametrize("transport", ["pty", pytest.param("tcp", marks=pytest.mark.slow)])
def test_blocking_the_outlet_raises_the_pressure_until_the_fault_is_cleared(tmp_path: Path, transport: str) -> None:
    with sim_process(tmp_path, pace=50, transport=transport) as sim:
        pumps, sensors = Bus(sim, "bus-1"), Bus(sim, "bus-2")
        deliver(sim, pumps, 0.5)
        wait_process(sim, 30)
        before_bar = pressure_bar(sensors)
        assert 1.5 < before_bar < 6  # the back-pressure regulator holds 2 bar
        sim.ask("fault", kind="block", target="L-4")
        wait_process(sim, 20)
        assert pressure_bar(sensors) > before_bar + 2
        assert pumps.ask("11", "stop") == pumps.ask("12", "stop") == "ok"
        sim.ask("clear", kind="block", target="L-4")
        wait_process(sim, 60)
        assert pressure_bar(sensors) < before_bar


def test_every_device_of_the_example_rig_tells_that_it_is_simulated(tmp_path: Path) -> None:
    with sim_process(tmp_path, pace=20) as sim:
        bus_1, bus_2, cell = (Bus(sim, link) for link in ("bus-1", "bus-2", "ir-port"))
        for bus, addresses in ((bus_1, ("11", "12", "21", "22", "23")), (bus_2, ("31",)), (cell, ("41",))):
            assert all(bus.ask(address, "who?").endswith(" simulated") for address in addresses)
        with serial.serial_for_url(sim.ports["chiller-port"], timeout=2) as chiller:
            chiller.write(b"ID\r")
            assert chiller.readline().endswith(b" SIMULATED\r\n")
        assert cell.ask("41", "grid?") == "ok n=236 from=860.0 step=4.0 every=5.0"
        wait_process(sim, 6)
        assert re.fullmatch(r"ok count=\d+ age=\d+\.\d data=[0-9A-F]{944}", cell.ask("41", "spectrum?"))


def test_an_interrupt_ends_it_cleanly(tmp_path: Path) -> None:
    # SIGTERM: every other test here ends by it and looks at the exit code
    with sim_process(tmp_path, pace=20) as sim:
        os.kill(sim.process.pid, signal.SIGINT)
        assert sim.process.wait(5) == 0
        assert [path.name for path in tmp_path.iterdir()] == ["sim.lock"]


@pytest.mark.slow
def test_a_second_process_is_told_which_one_serves(tmp_path: Path) -> None:
    with sim_process(tmp_path) as sim:
        second = subprocess.run(
            [
                sys.executable,
                "-c",
                "import sys; from rigd_sim.bench.meeting import Meeting; Meeting(sys.argv[1])",
                tmp_path,
            ],
            capture_output=True,
            text=True,
            check=False,
        )
        assert f"process {sim.process.pid} already serves" in second.stderr


@pytest.mark.slow
def test_a_killed_server_leaves_the_folder_free(tmp_path: Path) -> None:
    with pytest.raises(AssertionError), sim_process(tmp_path) as sim:
        sim.process.kill()
    with sim_process(tmp_path) as sim:
        assert Bus(sim, "bus-2").ask("31", "flags?") == "ok restarted=1 fault=0"


def test_it_answers_fast_enough_for_a_paced_run(tmp_path: Path) -> None:
    with sim_process(tmp_path, pace=30) as sim:
        pumps, sensors = Bus(sim, "bus-1"), Bus(sim, "bus-2")
        deliver(sim, pumps, 1.0)
        asked, start_s = 0, time.monotonic()
        while (span_s := time.monotonic() - start_s) < 1.0:
            sensors.ask("31", "read? p1 p2")
            asked += 1
        assert asked / span_s > REQUESTS_PER_S_LEAST
