"""Debian's MQTT broker as a child process on a free loopback port."""

from __future__ import annotations

import contextlib
import shutil
import signal
import socket
import subprocess
import time
from collections.abc import Iterator
from pathlib import Path


def free_port() -> int:
    """A TCP port of the loopback that was free a moment ago."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


class Broker:
    """Start, stop and start again on the same port."""

    def __init__(self, folder: Path, port: int | None = None) -> None:
        program = shutil.which("mosquitto")
        assert program, "the MQTT broker is missing: sudo apt-get install mosquitto"
        self._program = program
        self.port = port or free_port()
        self._config = folder / "mosquitto.conf"
        self._config.write_text(
            f"listener {self.port} 127.0.0.1\nallow_anonymous true\nmax_queued_messages 100000\n"
            f"persistence true\npersistence_location {folder}/\n"
        )
        self.process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        self.process = subprocess.Popen(
            [self._program, "-c", str(self._config)], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
        )
        deadline = time.monotonic() + 10
        while time.monotonic() < deadline:
            with contextlib.suppress(OSError), socket.create_connection(("127.0.0.1", self.port), 0.2):
                return
            time.sleep(0.02)
        raise AssertionError("the MQTT broker did not start")

    def stop(self) -> None:
        if self.process is not None:
            self.process.terminate()  # it saves the sessions it keeps for absent subscribers
            self.process.wait()
            self.process = None

    def freeze(self) -> None:
        """Stop the process without closing a socket: slower than slow."""
        assert self.process is not None
        self.process.send_signal(signal.SIGSTOP)

    def thaw(self) -> None:
        assert self.process is not None
        self.process.send_signal(signal.SIGCONT)


@contextlib.contextmanager
def running_broker(folder: Path) -> Iterator[Broker]:
    """A broker for the length of a test."""
    broker = Broker(folder)
    broker.start()
    try:
        yield broker
    finally:
        broker.stop()
