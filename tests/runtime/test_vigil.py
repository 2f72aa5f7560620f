"""The shell's watch over itself, and control's half of the run permission."""

from __future__ import annotations

import asyncio
import os
from dataclasses import dataclass, field

import pytest

from rigd.model.ticket import STAGES, after_scan, read_ticket
from rigd.runtime.permission import Permission, watch_life
from rigd.runtime.vigil import Vigil

MS = 1_000_000


@dataclass
class Times:
    wall: int = 1
    slept: int = 5
    trouble_text: str = ""
    vigil: Vigil = field(init=False)

    def make(self, pace: float) -> Vigil:
        return Vigil(100 * MS, pace, self, lambda: self.wall, lambda: self.slept)  # type: ignore[arg-type]

    def trouble(self) -> str:
        return self.trouble_text


@pytest.mark.parametrize(("pace", "limit_ms"), [(1.0, 300), (20.0, 500)])
def test_a_scan_that_comes_late_is_told_once(pace: float, limit_ms: int) -> None:
    times = Times()
    vigil = times.make(pace)
    assert vigil.faults() == ()
    times.wall += limit_ms * MS
    assert vigil.faults() == ()
    times.wall += (limit_ms + 1) * MS
    ((name, detail),) = vigil.faults()
    assert name == "scan"
    assert f"{limit_ms + 1} ms since the last scan" in detail
    assert vigil.faults() == ()


def test_a_suspended_computer_is_noticed_although_the_clock_stood_still() -> None:
    times = Times()
    vigil = times.make(1.0)
    vigil.faults()
    times.slept += 400 * MS
    assert vigil.faults() == ()
    times.slept += 3_600_000 * MS
    assert vigil.faults() == (("suspend", "the computer was suspended for 3600.0 s"),)
    assert vigil.faults() == ()


def test_journal_and_guard_faults_last_as_long_as_their_cause() -> None:
    times = Times(trouble_text="disk full")
    vigil = times.make(1.0)
    assert vigil.faults() == vigil.faults() == (("journal", "disk full"),)
    times.trouble_text, vigil.guard_lost = "", True
    assert [name for name, _ in vigil.faults()] == ["guard"]


def test_tickets_prove_every_scan_and_are_rare() -> None:
    read, write = os.pipe()
    now = [10_000 * MS]
    permission = Permission(write, lambda: now[0])
    proof = 0
    for scan in range(1, 31):
        for stage in STAGES:
            permission.done(scan, stage)
        proof = after_scan(proof, scan)
        now[0] += 10 * MS
        permission.offer(scan)
    permission.say_end(1, "all\nis over")
    os.close(write)
    with os.fdopen(read, "rb") as pipe:
        *lines, last = pipe.read().splitlines()
    tickets = [read_ticket(line) for line in lines]
    assert len(tickets) == 3
    assert last == b"D 1 all is over"
    check, scan = 0, 0
    for ticket in tickets:
        assert ticket is not None
        for number in range(scan + 1, ticket.scan + 1):
            check = after_scan(check, number)
        assert ticket.proof == check
        scan = ticket.scan


def test_a_pipe_that_is_full_or_gone_never_stops_control() -> None:
    read, write = os.pipe()
    now = [0]
    permission = Permission(write, lambda: now[0])
    for scan in range(1, 20_000):
        now[0] += 200 * MS
        permission.offer(scan)
    os.close(read)
    permission.offer(99_999)
    os.close(write)


async def test_the_end_of_the_guard_is_seen_once() -> None:
    read, write = os.pipe()
    seen = []
    watch_life(read, lambda: seen.append(1))
    await asyncio.sleep(0.01)
    assert not seen
    os.close(write)
    await asyncio.sleep(0.05)
    assert seen == [1]
    os.close(read)
