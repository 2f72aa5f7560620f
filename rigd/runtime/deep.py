"""The deep rehearsal: the live shell and the drivers unchanged, against byte-level emulators, in virtual time.

What the fast one leaves out is here: every byte, reply delays, time-outs, polls that share a line. It costs about fifty
times as much. The emulated lines and the plant are moved whenever the clock has moved: on every byte from a driver, and
every ``TICK_S``.
"""

from __future__ import annotations

import asyncio
import contextlib
import time
from collections.abc import Callable, Coroutine, Mapping, Sequence

from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.memory_link import MemoryLink, memory_pair
from rigd.logic.program import Program
from rigd.logic.run_end import RunEnd
from rigd.logic.scan import CoreState
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkClosed
from rigd.model.events import Event
from rigd.model.intake import Intake
from rigd.model.orders import Order, Request
from rigd.model.samples import Spectrum
from rigd.ports.driver import Driver
from rigd.ports.link import Link
from rigd.ports.plant import EmulatedLine, Plant
from rigd.runtime.dry import DryOptions, DryResult, signal_of, unfinished
from rigd.runtime.live import Live, Surroundings
from rigd.runtime.tape import Tape
from rigd.runtime.virtual_time import LoopClock, VirtualLoop

TICK_S = 0.05
"""How often the emulated lines see time pass (``rigd.ports.plant.EmulatedLine.tick``)."""
DISK_S = 60.0
"""Longest real wait for a disk that is slower than virtual time."""
NS = 1_000_000_000

Watch = Callable[[int, CoreState], None]


class DeepShell:
    """Runs one program over emulated lines. ``watch`` is called once per virtual second."""

    def __init__(
        self,
        program: Program,
        plant: Plant,
        lines: Mapping[str, EmulatedLine],
        drivers: Mapping[str, Driver],
        journal: SqliteJournal | None = None,
        watch: Watch | None = None,
    ) -> None:
        self._program, self._plant, self._drivers, self._watch = program, plant, drivers, watch
        self._lines = lines
        self._kept = _Kept(journal, self._look, signal_of(program))
        self._clock = LoopClock()
        self._far: dict[str, MemoryLink] = {}
        self._tasks: set[asyncio.Task[None]] = set()
        self._live: Live | None = None

    def run(self, options: DryOptions) -> DryResult:
        """Run until the run is over, or ``limit_ns`` has passed."""
        with asyncio.Runner(loop_factory=VirtualLoop) as runner:
            return runner.run(self._run(options))

    async def _run(self, options: DryOptions) -> DryResult:
        self._live = live = Live(
            Surroundings(
                self._program,
                self._program.rig.links,
                self._drivers,
                self._open,
                self._kept,
                self._clock,
                self._clock.now_ns,
                lambda: 0,
                signer=options.signer,
            )
        )
        self._spawn(self._ticks())
        for request in options.requests:
            self._spawn(self._ask(request))
        end: RunEnd | None = None
        try:
            with contextlib.suppress(TimeoutError):
                end = await asyncio.wait_for(live.run(), options.limit_ns / NS)
        finally:
            for task in self._tasks:
                task.cancel()
        tape = self._kept.tape
        end = end or unfinished(self._kept.now_ns, tape.events)
        return DryResult(
            end.outcome,
            end.exit_code,
            end.text,
            tape.hash.hexdigest(),
            self._kept.now_ns,
            live.loop.state,
            tape.events,
            tape.peak,
            self._kept.scans,
            tape.followed,
        )

    def _look(self, now_ns: int) -> None:
        if self._watch is not None and self._live is not None:
            self._watch(now_ns, self._live.loop.state)

    async def _open(self, spec: LinkSpec) -> Link:
        near, far = memory_pair(spec.id)
        self._far[spec.id] = far
        self._spawn(self._answers(spec.id, far))
        return near

    async def _ask(self, request: Request) -> None:
        await self._clock.sleep_until(request.t_ns)
        if self._live is not None:
            self._live.submit(request)

    async def _ticks(self) -> None:
        while True:
            now_s = self._advance()
            for link, line in self._lines.items():
                self._send(link, line.tick(now_s))
            await asyncio.sleep(TICK_S)

    async def _answers(self, link: str, far: MemoryLink) -> None:
        with contextlib.suppress(LinkClosed):
            while True:
                data = await far.read()
                self._send(link, self._lines[link].feed(data, self._advance()))

    def _send(self, link: str, pieces: Sequence[tuple[float, bytes]]) -> None:
        for delay_s, data in pieces:
            self._spawn(self._later(link, delay_s, data))

    async def _later(self, link: str, delay_s: float, data: bytes) -> None:
        await asyncio.sleep(delay_s)
        if link in self._far:
            with contextlib.suppress(LinkClosed):
                await self._far[link].write(data)

    def _advance(self) -> float:
        now_ns = self._clock.now_ns()
        self._plant.advance(now_ns)
        return now_ns / NS

    def _spawn(self, work: Coroutine[object, object, None]) -> None:
        task = asyncio.create_task(work)
        self._tasks.add(task)
        task.add_done_callback(self._tasks.discard)


class _Kept:
    """The journal of a deep rehearsal: keeps the tape, and lets virtual time stand while a real disk is behind."""

    def __init__(self, journal: SqliteJournal | None, look: Callable[[int], None], follow: str) -> None:
        self._journal, self._look = journal, look
        self._look_ns = 0
        self.tape = Tape(follow)
        self.now_ns = 0
        self.scans = 0

    def scan(self, number: int, now_ns: int, utc: str, intake: Intake) -> None:
        """See ``rigd.ports.journal``, as for all that follow."""
        self.scans, self.now_ns = number, now_ns
        self.tape.samples(intake.samples)
        if self._journal is not None:
            self._journal.scan(number, now_ns, utc, intake)
        if now_ns >= self._look_ns:
            self._look_ns = now_ns + NS
            self._look(now_ns)

    def decided(self, number: int, orders: Sequence[Order], events: Sequence[Event]) -> None:
        self.tape.decided(orders, events)
        if self._journal is not None:
            self._journal.decided(number, orders, events)

    def spectrum(self, spectrum: Spectrum) -> None:
        if self._journal is not None:
            self._journal.spectrum(spectrum)

    def bytes_seen(self, link: str, t_ns: int, sent: bool, data: bytes) -> None:
        if self._journal is not None:
            self._journal.bytes_seen(link, t_ns, sent, data)

    def trouble(self) -> str:
        if self._journal is None:
            return ""
        for _ in range(int(DISK_S / 0.01)):
            if not self._journal.behind():
                break
            time.sleep(0.01)
        return self._journal.trouble()

    def close(self, outcome: str) -> None:
        """Whoever made the journal closes it."""
