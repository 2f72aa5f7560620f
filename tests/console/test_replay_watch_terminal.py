"""``rigd replay --watch`` under a pseudo-terminal: played, paused, stepped, moved and left, as a person would."""

from __future__ import annotations

import contextlib
import os
import pty
import re
import select
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Iterator
from fcntl import ioctl
from pathlib import Path

import pytest
from fakes.recorded import BLOCK, recorded

pytestmark = [pytest.mark.slow, pytest.mark.timeout(60)]

FOOT = re.compile(r"PLAYBACK (\S+)\s+scan (\d+) of (\d+)\s+([\d.]+) s")
Seen = tuple[str, int, float]


class Terminal:
    """A person in front of the playback: types keys, reads the foot of the screen."""

    def __init__(self, run: Path, *more: str) -> None:
        self._near, far = pty.openpty()
        ioctl(far, termios.TIOCSWINSZ, struct.pack("HHHH", 50, 140, 0, 0))
        self._far = far
        self.before = termios.tcgetattr(far)
        command = [sys.executable, "-m", "rigd", "replay", str(run), "--watch", *more]
        environment = {**os.environ, "TERM": "xterm-256color"}
        self.process = subprocess.Popen(command, stdin=far, stdout=far, stderr=far, env=environment)
        self.last = 0

    def type(self, keys: str) -> None:
        os.write(self._near, keys.encode())

    def foot(self, seconds: float = 0.5) -> Seen:
        """The newest foot after everything that was drawn within this time: playing or not, scan, process time [s]."""
        text, end_s = "", time.monotonic() + seconds
        while (left_s := end_s - time.monotonic()) > 0 or not FOOT.search(text):
            assert self.process.poll() is None, text
            assert left_s > -20, text
            if select.select([self._near], [], [], max(left_s, 0.1))[0]:
                text += os.read(self._near, 65536).decode(errors="replace")
        found = FOOT.findall(re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", text))
        going, scan, self.last, now_s = found[-1][0], int(found[-1][1]), int(found[-1][2]), float(found[-1][3])
        return going, scan, now_s

    def after(self, keys: str, seconds: float = 0.5) -> Seen:
        self.type(keys)
        return self.foot(seconds)

    def leave(self) -> int:
        """The exit code after q, with what is still drawn read away."""
        self.type("q")
        end_s = time.monotonic() + 20
        while self.process.poll() is None and time.monotonic() < end_s:
            if select.select([self._near], [], [], 0.05)[0]:
                os.read(self._near, 65536)
        return self.process.wait(1)

    @property
    def settings(self) -> list[object]:
        return termios.tcgetattr(self._far)

    def close(self) -> None:
        self.process.kill()
        self.process.wait()
        for descriptor in (self._near, self._far):
            os.close(descriptor)


@contextlib.contextmanager
def terminal(*more: str) -> Iterator[Terminal]:
    one = Terminal(recorded(BLOCK), *more)
    try:
        yield one
    finally:
        one.close()


def test_played_at_a_speed_paused_and_gone_step_by_step():
    with terminal("--from", "5 s", "--speed", "2") as one:
        going, _, began_s = one.foot()
        assert going == "×2"
        assert began_s < 15
        time.sleep(1.0)
        _, _, later_s = one.foot()
        assert 1.0 < later_s - began_s < 12.0
        going, scan, paused_s = one.after(" ")
        assert going == "paused"
        assert one.foot(0.5) == ("paused", scan, paused_s)
        assert one.after(".")[1] == scan + 1
        assert one.after(",")[1] == scan
        assert one.after(",")[1] == scan - 1
        assert one.after("+ ")[0] == "×5"
        assert one.after("--")[0] == "×1"
        assert one.leave() == 0
        assert one.settings == one.before


def test_moved_to_any_time_forwards_and_back():
    with terminal("--from", "1 s", "--speed", "0.1") as one:
        one.after(" ")
        _, last, end_s = one.after("\x1b[C")  # half a minute on: beyond the end of this run
        assert last == one.last
        assert one.after("5")[2] == pytest.approx(end_s / 2, abs=1.0)
        assert one.after("0")[1] == 1
        trip_s = one.after("]]]")[2]
        assert 0 < trip_s < end_s
        assert one.after("\x1b[D")[1] == 1
        assert one.leave() == 0
        assert one.settings == one.before
