"""Start control, watch its tickets, end it when they fail, and see to it that the rig stops.

House rules. (1) Control has permission as long as its tickets come in time (not late, not early) and prove their scans
(``rigd.model.ticket``). (2) Control may end by itself only after it has said so: ``D <exit code> <sentence>``. (3) In
every other case it is killed first, so that it cannot send anything after the last wills. (4) Signals are control's
business (first: orderly stop, second: cut); the guard hands them on, and what comes before control is ready waits
for it. (5) A closed terminal (SIGHUP) ends nothing.
(6) The
pipe of ``RIGD_LIFE_FD``, from which control reads nothing, tells it by its end that the guard is gone. (7) Boot time
that runs ahead of monotonic time means that the computer slept and nobody watched: control may not go on.
"""

from __future__ import annotations

import contextlib
import json
import os
import select
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from rigd.guard.notify import Notifier
from rigd.guard.wills import Log, send_wills
from rigd.model.ticket import Window, read_ticket

FAREWELL_S = 15.0
SLEPT_NS = 1_000_000_000
LOOK_S = 0.5
SIGNALS = (signal.SIGINT, signal.SIGTERM)


def suspended_ns() -> int:
    """Time that this computer has spent suspended since it was started; 0 on a system without such a clock."""
    boot = getattr(time, "CLOCK_BOOTTIME", None)
    return 0 if boot is None else time.clock_gettime_ns(boot) - time.clock_gettime_ns(time.CLOCK_MONOTONIC)


class Guard:
    """One run: ``watch`` until control has ended or has to be ended. ``slept_ns`` as ``suspended_ns``."""

    def __init__(self, plan_path: str, slept_ns: Callable[[], int] = suspended_ns) -> None:
        self._slept_ns, self._awake_ns = slept_ns, slept_ns()
        self._notifier = Notifier()
        self.plan: dict[str, Any] = json.loads(Path(plan_path).read_text(encoding="utf-8"))
        self.folder = Path(self.plan["folder"])
        self.log = Log(self.folder / "guard.log")
        self.signals = 0
        self.control: subprocess.Popen[bytes] | None = None
        signal.pthread_sigmask(signal.SIG_BLOCK, SIGNALS)
        for number in SIGNALS:
            signal.signal(number, self._signal)
        signal.signal(signal.SIGHUP, signal.SIG_IGN)
        self.end: tuple[int, str] | None = None
        self.wrong = ""
        self._window = Window(self.plan["first_s"], self.plan["early_s"], self.plan["late_s"], time.monotonic_ns())
        self._buffer = b""
        self.began = False
        self.control, self._tickets, self._life = self._start_control(plan_path)
        signal.pthread_sigmask(signal.SIG_UNBLOCK, SIGNALS)
        self.helpers: list[subprocess.Popen[bytes]] = []
        for command in self.plan["helpers"]:
            with contextlib.suppress(OSError):
                self.helpers.append(self._start(command))

    def watch(self) -> None:
        """Returns when control said its end (``end``), or with the reason why it may not go on (``wrong``)."""
        while self.end is None and not self.wrong:
            left_s = (self._window.deadline_ns - time.monotonic_ns()) / 1e9
            heard = select.select([self._tickets], [], [], min(max(0.0, left_s), LOOK_S))[0]
            slept_ns = self._slept_ns() - self._awake_ns
            if self.began and slept_ns > SLEPT_NS:
                self.wrong = f"was suspended with the computer for {slept_ns / 1e9:.1f} s"
            elif heard:
                self._read()
            elif time.monotonic_ns() >= self._window.deadline_ns:
                self.wrong = "gave no sign of life in time"

    def finish_control(self) -> None:
        """Wait a little for a control that said its end, kill any other."""
        assert self.control is not None
        if self.end is not None and not self.wrong:
            with contextlib.suppress(subprocess.TimeoutExpired):
                self.control.wait(FAREWELL_S)
        self.control.kill()
        self.log.write(f"control ended with status {self.control.wait()}")

    def finish_notifying(self, sentence: str) -> None:
        """Tell a service manager how it ended."""
        self._notifier.say(f"STOPPING=1\nSTATUS={sentence}")

    def finish_helpers(self) -> None:
        """Let the front send what it has, and the progress display clear its line; then end them."""
        deadline_s = time.monotonic() + FAREWELL_S
        for helper in self.helpers:
            with contextlib.suppress(subprocess.TimeoutExpired):
                helper.wait(max(0.1, deadline_s - time.monotonic()))
            if helper.poll() is None:
                helper.terminate()
            with contextlib.suppress(subprocess.TimeoutExpired):
                helper.wait(2.0)
            helper.kill()
            helper.wait()

    def _start_control(self, plan_path: str) -> tuple[subprocess.Popen[bytes], int, int]:
        life_read, life_write = os.pipe()
        tickets_read, tickets_write = os.pipe()
        given = {"RIGD_LIFE_FD": str(life_read), "RIGD_TICKET_FD": str(tickets_write)}
        with (self.folder / "control.log").open("ab") as output:
            control = subprocess.Popen(
                [*self.plan["control"], plan_path],
                stdin=subprocess.DEVNULL,
                stdout=output,
                stderr=output,
                start_new_session=True,
                pass_fds=(life_read, tickets_write, *self.plan["locks"]),
                env={**os.environ, **given},
            )
        os.close(life_read)
        os.close(tickets_write)
        return control, tickets_read, life_write

    def _start(self, command: dict[str, Any]) -> subprocess.Popen[bytes]:
        """A helper whose life or death changes nothing here."""
        with (self.folder / f"{command['name']}.log").open("ab") as output:
            stderr = None if command["shown"] else output
            return subprocess.Popen(
                command["argv"], stdin=subprocess.DEVNULL, stdout=output, stderr=stderr, start_new_session=True
            )

    def _signal(self, number: int, _frame: object) -> None:
        self.signals += 1
        if self.control is not None:
            self.control.send_signal(number)

    def _read(self) -> None:
        data = os.read(self._tickets, 65536)
        if not data:
            self.wrong = "was ended by a third signal" if self.signals > 2 else "ended without a word"
            return
        *lines, self._buffer = (self._buffer + data).split(b"\n")
        for line in lines:
            self._hear(line)

    def _hear(self, line: bytes) -> None:
        if line.startswith(b"D "):
            _, code, sentence = line.decode(errors="replace").split(" ", 2)
            self.end = (int(code), sentence)
        elif ticket := read_ticket(line):
            self.began = True
            self.wrong = self.wrong or self._window.judge(ticket, time.monotonic_ns())
            if not self.wrong:
                self._notifier.alive()
        else:
            self.wrong = self.wrong or f"said something that is no ticket ({line[:40]!r})"


def guard(plan_path: str, slept_ns: Callable[[], int] = suspended_ns) -> int:
    """Guard one run; returns the exit code of the daemon: control's own, or 1 when the guard had to stop the rig."""
    one = Guard(plan_path, slept_ns)
    one.watch()
    one.finish_control()
    code, sentence = one.end if one.end is not None and not one.wrong else _take_over(one)
    one.finish_notifying(sentence)
    _say(sentence)
    one.finish_helpers()
    for path in one.plan["cleanup"]:
        Path(path).unlink(missing_ok=True)
    if one.plan["after"] and one.began:
        subprocess.run(one.plan["after"], check=False)
    return code


def _take_over(one: Guard) -> tuple[int, str]:
    began, utc = time.monotonic(), datetime.now(UTC).isoformat(timespec="milliseconds")
    _say(f"control {one.wrong}; the guard has ended it and is stopping the rig")
    one.log.write(f"control {one.wrong}")
    already = one.signals
    devices = send_wills(one.plan["wills"], one.log, lambda: one.signals - already >= 2)
    loose = [device for device, state in devices.items() if not state["confirmed"]]
    seconds = round(time.monotonic() - began, 3)
    report = {"why": f"control {one.wrong}", "utc": utc, "devices": devices, "seconds": seconds}
    with contextlib.suppress(OSError):  # a full disk changes nothing about the rig
        (one.folder / "guard.json").write_text(json.dumps(report, indent=1) + "\n", encoding="utf-8")
    if loose:
        return 1, f"NOT CONFIRMED as stopped: {', '.join(loose)}. Stop them by hand now; see {one.folder}/guard.log"
    return 1, f"the guard stopped the rig and every device confirmed it, because control {one.wrong}; see {one.folder}"


def _say(sentence: str) -> None:
    with contextlib.suppress(OSError):  # the terminal may be gone
        print(f"rigd: {sentence}", file=sys.stderr, flush=True)  # noqa: T201 - the guard has no console room
