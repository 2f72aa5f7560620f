"""Time from the bytes that carry a bad pressure to the bytes that stop a pump, through the whole live shell.

Real drivers, real links over pseudo-terminals, the real core in the middle of a recipe, journal on disk, door with its
listeners. The devices are in another process, which takes both times (``trip_far_end``). After each trip the core's
state is put back to what it was before: it is a value, and a run that has tripped is over. The floor is an event loop
that only echoes (``trip_echo``), on the same terminals, half of it before and half after.
"""

from __future__ import annotations

import asyncio
import contextlib
import gc
import json
import os
import subprocess
import sys
import tempfile
from collections.abc import AsyncIterator, Iterator
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any
from unittest.mock import patch

from bench.figures import Figure, Scale, Target, quantile
from bench.trip_load import listeners
from bench.trip_rig import ECHO, GO, LIVE, PUMPS, SENSORS, trip_rig

from rigd.adapters.clock import PacedClock, suspended_ns, wall_ns
from rigd.adapters.door_server import DoorServer
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.open_link import open_link
from rigd.app import make_drivers
from rigd.logic import scan as core
from rigd.logic.arbitration import Aspect
from rigd.logic.program import RunOptions, compile_program
from rigd.model.orders import Action, Result
from rigd.runtime.live import Live, Surroundings

HERE = Path(__file__).resolve().parent
HOUR_NS = 3_600_000_000_000
"""Samples of the state that is put back may be as old as this."""
PATIENCE_s = 2.0
START_s = 60.0


@dataclass
class TripTimes:
    """Latencies [ms]: first stop and stop of the last pump; floor; trips of which nothing was heard."""

    first: list[float] = field(default_factory=list)
    last: list[float] = field(default_factory=list)
    floor: list[float] = field(default_factory=list)
    unheard: int = 0
    load: str = ""


def trip_figures(scale: Scale) -> Iterator[Figure]:
    """Median, 99 % and worst."""
    times = asyncio.run(measure_trips(scale.pick(5, 2000, 10_000), loaded=scale is not Scale.QUICK))
    about = f"{len(times.first)} trips; {times.load}"
    if times.unheard:
        about += f"; {times.unheard} tripped by something else first"
    detail: dict[str, object] = {
        "last_pump_ms": {f"{share:g}": quantile(times.last, share) for share in (0.5, 0.99, 1)},
        "first_ms": {f"{share:g}": quantile(times.first, share) for share in (0.5, 0.9, 0.99, 0.999, 1)},
        "floor_ms": {f"{share:g}": quantile(times.floor, share) for share in (0.5, 0.9, 0.99, 0.999, 1)},
    }
    for name, share, target in (
        ("p50", 0.5, Target()),
        ("p99", 0.99, Target(ratio_max=2)),
        ("worst", 1.0, Target(value_max=20)),
    ):
        yield Figure(
            f"trip.{name}",
            f"trip, bad bytes in to stop bytes out, {name}",
            "ms",
            quantile(times.first, share),
            quantile(times.floor, share),
            "event-loop echo",
            target,
            about if share == 0.5 else "",
            detail=detail if share == 0.5 else {},
        )


async def measure_trips(trips: int, *, loaded: bool) -> TripTimes:
    """Echo, trip, echo."""
    times = TripTimes()
    with tempfile.TemporaryDirectory() as name:
        async with far_end() as far:
            await _echo(far, times, (trips + 1) // 2)
            with _scheduling():
                await _trips(far, times, trips, Path(name), loaded)
            await _echo(far, times, (trips + 1) // 2)
    return times


class Far:
    """The pipe to the far end."""

    def __init__(self, process: asyncio.subprocess.Process) -> None:
        self._process = process
        self.ports: dict[str, str] = {}

    def tell(self, word: str) -> None:
        assert self._process.stdin is not None
        self._process.stdin.write(f"{word}\n".encode())

    async def hear(self, seconds: float) -> dict[str, Any]:
        """The next line; ``TimeoutError`` when none comes."""
        assert self._process.stdout is not None
        async with asyncio.timeout(seconds):
            line = await self._process.stdout.readline()
        if not line:
            raise RuntimeError("the far end of the trip figure has ended")
        facts: dict[str, Any] = json.loads(line)
        return facts


@contextlib.asynccontextmanager
async def far_end() -> AsyncIterator[Far]:
    """The devices, in a process of their own."""
    process = await asyncio.create_subprocess_exec(
        sys.executable, str(HERE / "trip_far_end.py"), stdin=subprocess.PIPE, stdout=subprocess.PIPE
    )
    far = Far(process)
    try:
        far.ports = (await far.hear(START_s))["ports"]
        yield far
    finally:
        if process.returncode is None:
            process.kill()
        await process.wait()


async def _echo(far: Far, times: TripTimes, count: int) -> None:
    far.tell(ECHO)
    program = [sys.executable, str(HERE / "trip_echo.py"), far.ports[SENSORS], far.ports[PUMPS], str(count)]
    process = await asyncio.create_subprocess_exec(*program)
    for _ in range(count):
        times.floor.append((await far.hear(START_s))["first_ns"] / 1e6)
    assert await process.wait() == 0


@contextlib.contextmanager
def _scheduling() -> Iterator[None]:
    """As ``rigd.app.control_main`` sets it."""
    before = sys.getswitchinterval()
    sys.setswitchinterval(0.0005)
    gc.collect()
    gc.freeze()
    try:
        yield
    finally:
        sys.setswitchinterval(before)


async def _trips(far: Far, times: TripTimes, trips: int, folder: Path, loaded: bool) -> None:
    far.tell(LIVE)
    rig, recipe = trip_rig()
    links = tuple(replace(link, port=far.ports[link.id]) for link in rig.links)
    journal = SqliteJournal(folder / "run.sqlite", {}, rig.tags)
    clock = PacedClock()
    program = compile_program(rig, recipe, RunOptions(stale_floor_ns=HOUR_NS, travel_floor_ns=HOUR_NS))
    given = Surroundings(program, links, make_drivers(rig), open_link, journal, clock, wall_ns, suspended_ns)
    live = Live(given)
    run = {"id": "bench", "folder": str(folder), "rig": rig.name, "recipe": recipe.name, "simulated": True, "pace": 1.0}
    door = DoorServer(
        folder / "door.sock",
        live.submit,
        lambda: {"run": {**run, "pid": os.getpid()}, "utc": clock.utc(), **live.loop.snapshot()},
        clock.now_ns,
    )
    await door.open()
    live.tell, live.refresh = door.tell, door.refresh
    with patch.object(core, "run_end", lambda program, state: None), contextlib.ExitStack() as stack:
        running = asyncio.create_task(live.run())
        assert "delivering" in await far.hear(START_s)
        times.load = "journal, door"
        if loaded:
            times.load += ", " + await asyncio.to_thread(stack.enter_context, listeners(folder, door._path))
        await asyncio.sleep(0.5)
        await _trip_again_and_again(far, Rewind(live), times, trips)
        running.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await running
    await door.close("done", 0)
    await asyncio.to_thread(journal.close, "done")


class Rewind:
    """Puts the core's state back, between two scans."""

    def __init__(self, live: Live) -> None:
        self._loop = live.loop
        self._armed = live.loop._state
        self._scan = live.loop.scan
        self._wanted = asyncio.Event()
        self._done = asyncio.Event()
        live.loop.scan = self._scan_and_rewind  # type: ignore[method-assign]
        assert self._armed.protect.verdict.permit

    async def _scan_and_rewind(self) -> None:
        await self._scan()
        if self._wanted.is_set():
            self._loop._state = self._armed
            self._wanted.clear()
            self._done.set()

    async def rewind(self) -> None:
        """Return when the state has been put back."""
        self._done.clear()
        self._wanted.set()
        await self._done.wait()

    async def stopped(self) -> None:
        """Return when every pump has agreed to its stop."""
        while not self._agreed():
            await asyncio.sleep(0.002)

    def _agreed(self) -> bool:
        told = self._loop._state.memory.told
        rates = [one for (_, aspect), one in told.items() if aspect is Aspect.RATE]
        return all(one.order.action is Action.STOP and one.result is Result.DONE for one in rates)


async def _trip_again_and_again(far: Far, rewind: Rewind, times: TripTimes, trips: int) -> None:
    while len(times.first) < trips:
        far.tell(GO)
        try:
            heard = await far.hear(PATIENCE_s)
            async with asyncio.timeout(PATIENCE_s):
                await rewind.stopped()
        except TimeoutError:
            times.unheard += 1
            if times.unheard > trips // 10 + 3:
                raise RuntimeError(f"{times.unheard} of {trips} trips were not heard") from None
        else:
            times.first.append(heard["first_ns"] / 1e6)
            times.last.append(heard["last_ns"] / 1e6)
        await asyncio.sleep(0.005)
        await rewind.rewind()
