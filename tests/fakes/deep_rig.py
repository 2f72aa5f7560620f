"""A whole rig in virtual time: the live shell and the installed drivers unchanged, against the installed simulator's
emulated lines over memory links. Nothing but the plug-in surface of the simulator is used.
"""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import Callable, Coroutine, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, TypeVar

from rigd.adapters.memory_link import MemoryLink, memory_pair
from rigd.adapters.plugins import driver_family, plant_maker, simulator_maker
from rigd.logic.program import RunOptions, compile_program
from rigd.logic.run_end import RunEnd
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkClosed
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Order
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.model.samples import Spectrum
from rigd.ports.link import Link
from rigd.ports.plant import EmulatedLine, FaultSpec, Plant
from rigd.runtime.live import Live, Surroundings
from rigd.runtime.virtual_time import LoopClock, VirtualLoop

T = TypeVar("T")
TICK_S = 0.05


@dataclass
class ListJournal:
    """Keeps everything in lists; ``trouble_text`` is what it says about its disk."""

    intakes: list[tuple[int, int, Intake]] = field(default_factory=list)
    orders: list[Order] = field(default_factory=list)
    events: list[Event] = field(default_factory=list)
    spectra: list[Spectrum] = field(default_factory=list)
    trouble_text: str = ""

    def scan(self, number: int, now_ns: int, utc: str, intake: Intake) -> None:
        self.intakes.append((number, now_ns, intake))

    def decided(self, number: int, orders: Sequence[Order], events: Sequence[Event]) -> None:
        self.orders += orders
        self.events += events

    def spectrum(self, spectrum: Spectrum) -> None:
        self.spectra.append(spectrum)

    def bytes_seen(self, link: str, t_ns: int, sent: bool, data: bytes) -> None:
        raise AssertionError("no link is traced here")

    def trouble(self) -> str:
        return self.trouble_text

    def close(self, outcome: str) -> None:
        raise AssertionError("whoever made the journal closes it")


class DeepRig:
    """The simulated world, the shell, and hooks: ``pull`` a cable, ``inject`` a fault, read the plant's truth."""

    def __init__(self, rig: RigDefinition, recipe: Recipe, **more: Any) -> None:
        self.rig = rig
        self.journal = ListJournal()
        self.clock = LoopClock()
        self.plant: Plant = plant_maker().make(rig, rig.simulation.seed)
        self.lines: Mapping[str, EmulatedLine] = simulator_maker().lines(rig, self.plant, 1.0, 1)
        self.pulled: set[str] = set()
        self._far: dict[str, MemoryLink] = {}
        self._tasks: set[asyncio.Task[None]] = set()
        self.live = Live(
            Surroundings(
                compile_program(rig, recipe, more.pop("options", RunOptions())),
                rig.links,
                {device.id: driver_family(device.driver).make(device) for device in rig.devices},
                self.open,
                self.journal,
                self.clock,
                self.clock.now_ns,
                lambda: 0,
                **more,
            )
        )

    async def open(self, spec: LinkSpec) -> Link:
        if spec.id in self.pulled:
            raise LinkClosed(f"port {spec.port} does not exist")
        near, far = memory_pair(spec.id)
        self._far[spec.id] = far
        self._spawn(self._answers(spec.id, far))
        return near

    async def pull(self, link: str) -> None:
        """Pull a cable; put it back with ``pulled.discard``."""
        self.pulled.add(link)
        await self._far[link].close()

    def inject(self, kind: str, target: str, magnitude: float = 1.0) -> None:
        """A fault of the plant from now on."""
        self.plant.inject(FaultSpec(kind, target, onset_s=self.clock.now_ns() / 1e9, magnitude=magnitude))

    async def run(self) -> RunEnd:
        ticking = asyncio.create_task(self._ticks())
        try:
            return await self.live.run()
        finally:
            for task in (ticking, *self._tasks):
                task.cancel()

    def texts(self, *kinds: EventKind) -> list[str]:
        """What happened, as (kind: subject) for these kinds."""
        return [f"{event.kind}: {event.subject}" for event in self.journal.events if event.kind in kinds]

    async def until(self, condition: Callable[[], object], seconds: float = 600) -> None:
        """Let (virtual) time pass until a condition holds; an error after ``seconds``."""
        for _ in range(int(seconds / TICK_S)):
            if condition():
                return
            await asyncio.sleep(TICK_S)
        raise AssertionError(f"waited {seconds} s in vain; last events: {self.journal.events[-5:]}")

    def _spawn(self, work: Coroutine[Any, Any, None]) -> None:
        task = asyncio.create_task(work)
        self._tasks.add(task)
        task.add_done_callback(self._tasks.discard)

    async def _ticks(self) -> None:
        while True:
            now_s = self._advance()
            for link, line in self.lines.items():
                self._send(link, line.tick(now_s))
            await asyncio.sleep(TICK_S)

    async def _answers(self, link: str, far: MemoryLink) -> None:
        with contextlib.suppress(LinkClosed):
            while True:
                data = await far.read()
                self._send(link, self.lines[link].feed(data, self._advance()))

    def _send(self, link: str, pieces: Sequence[tuple[float, bytes]]) -> None:
        for delay_s, data in pieces:
            self._spawn(self._later(link, delay_s, data))

    async def _later(self, link: str, delay_s: float, data: bytes) -> None:
        await asyncio.sleep(delay_s)
        if link in self._far:
            with contextlib.suppress(LinkClosed):
                await self._far[link].write(data)

    def _advance(self) -> float:
        now_ns = self.clock.now_ns()
        self.plant.advance(now_ns)
        return now_ns / 1e9


def run_virtually(main: Coroutine[Any, Any, T]) -> T:
    """Run a coroutine on the virtual-time loop."""
    with asyncio.Runner(loop_factory=VirtualLoop) as runner:
        return runner.run(main)
