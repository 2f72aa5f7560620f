"""Serves a simulated rig on real ports: one thread, one selector, process time tied to the wall."""

from __future__ import annotations

import contextlib
import heapq
import selectors
import signal
import sys
import threading
import time
from collections.abc import Iterator, Mapping
from dataclasses import replace
from functools import partial
from types import FrameType

from rigd.model.errors import RigError
from rigd.model.rig import RigDefinition
from rigd.ports.plant import PlantMaker, SimulatorOptions
from rigd_sim.bench.control import Commands, ControlDoor, Halt
from rigd_sim.bench.ends import MAKERS, End
from rigd_sim.bench.meeting import Meeting
from rigd_sim.bench.warm import warm_up
from rigd_sim.bench.world import Arrival, TICK_wall_s, World
from rigd_sim.emulators.assemble import emulated_lines
from rigd_sim.emulators.line_faults import LINE_KINDS

AT_ONCE_s = 0.0005
"""A reply due so soon goes out now: the system's timer is no finer."""
LATE_s = 1.0
SIMULATED = "simulated"
"""The port of a link that asks for the simulator (rig file)."""
PACE_MAX = 1000.0


class Server:
    """One world behind open ports."""

    def __init__(self, world: World, ends: Mapping[str, End], halt: Halt, selector: selectors.BaseSelector) -> None:
        self._world = world
        self._ends = ends
        self._halt = halt
        self._started_s = time.monotonic()
        self._moved_s = 0.0
        self._due: list[tuple[float, int, str, bytes]] = []
        self._count = 0
        self._warned = False
        self._selector = selector
        for link, end in ends.items():
            end.attach(self._selector, partial(self._heard, link))

    def run(self) -> None:
        """Serve until told to stop."""
        while not self._halt.asked:
            for key, _ in self._selector.select(self._pause_s()):
                key.data()
            if self._wall_s() - self._moved_s >= TICK_wall_s:
                self.catch_up()
            self._send_due()

    def catch_up(self) -> None:
        """Bring the world to the present."""
        self._moved_s = wall_s = self._wall_s()
        self._queue(self._world.advance(wall_s))
        if self._wall_s() - wall_s > LATE_s and not self._warned:
            self._warned = True
            sys.stderr.write("The simulation cannot keep this pace on this computer; choose a smaller one.\n")

    def _heard(self, link: str, data: bytes) -> None:
        self.catch_up()
        self._queue(self._world.feed(link, data))

    def _queue(self, arrivals: list[Arrival]) -> None:
        now_s = time.monotonic()
        for link, delay_s, data in arrivals:
            if delay_s <= AT_ONCE_s and not self._due:
                self._ends[link].send(data)
            else:
                self._count += 1
                heapq.heappush(self._due, (now_s + delay_s, self._count, link, data))

    def _send_due(self) -> None:
        limit_s = time.monotonic() + AT_ONCE_s
        while self._due and self._due[0][0] <= limit_s:
            _, _, link, data = heapq.heappop(self._due)
            self._ends[link].send(data)

    def _pause_s(self) -> float:
        left_s = self._moved_s + TICK_wall_s - self._wall_s()
        if self._due:
            left_s = min(left_s, self._due[0][0] - time.monotonic())
        return max(0.0, left_s)

    def _wall_s(self) -> float:
        return time.monotonic() - self._started_s


def serve(rig: RigDefinition, options: SimulatorOptions, maker: PlantMaker) -> int:
    """Serve a rig until SIGINT, SIGTERM or a control line ends it; returns the exit code.

    0 after a clean end; 2, and one sentence on stderr, when it cannot start.
    """
    halt = Halt()
    try:
        with _signals(halt), contextlib.ExitStack() as stack:
            _opened(rig, options, maker, halt, stack).run()
    except RigError as error:
        sys.stderr.write(f"{error}\n")
        return 2
    return 0


def _opened(
    rig: RigDefinition, options: SimulatorOptions, maker: PlantMaker, halt: Halt, stack: contextlib.ExitStack
) -> Server:
    """Everything open, announced last; ``stack`` takes it back in the reverse order."""
    if not 0 < options.pace <= PACE_MAX:
        raise RigError(f"the pace must be above 0 and at most {PACE_MAX:g}, not {options.pace:g}")
    if options.transport not in MAKERS:
        raise RigError(f"transport {options.transport!r} is not one of {', '.join(MAKERS)}")
    meeting = Meeting(options.folder)
    stack.callback(meeting.close)
    if not options.quiet:
        sys.stderr.write("Preparing the simulated rig; the first start on a computer compiles it and takes longer.\n")
    warm_up(maker.make(rig, options.seed), rig)
    plant = maker.make(rig, options.seed)
    served = _served(rig)
    lines = emulated_lines(served, plant, options.pace, options.seed)
    devices = {spec.id: spec.link for spec in served.devices}
    world = World(plant, lines, devices, maker.fault_kinds(), LINE_KINDS, options.pace)
    for fault in options.faults:
        world.inject(fault)
    selector = stack.enter_context(selectors.DefaultSelector())  # closed last: the ends take themselves out of it
    ends: dict[str, End] = {}
    for link in lines:
        ends[link] = MAKERS[options.transport]()
        stack.callback(ends[link].close)
    commands = Commands(world, halt)
    server = Server(world, ends, halt, selector)
    door = ControlDoor(meeting.socket_path, commands, selector, server.catch_up)
    stack.callback(door.close)
    ports = {link: end.name for link, end in ends.items()}
    meeting.announce(rig.name, options.pace, ports)
    if not options.quiet:
        _tell(rig, options, ports)
    return server


def _served(rig: RigDefinition) -> RigDefinition:
    """The rig with the links that ask for the simulator; with all of them when none does (a real rig rehearsed)."""
    links = tuple(link for link in rig.links if link.port == SIMULATED) or rig.links
    names = {link.id for link in links}
    return replace(rig, links=links, devices=tuple(spec for spec in rig.devices if spec.link in names))


def _tell(rig: RigDefinition, options: SimulatorOptions, ports: Mapping[str, str]) -> None:
    sys.stderr.write(f"Simulated rig {rig.name!r} at pace {options.pace:g}; nothing here is real. End with Ctrl-C.\n")
    width = max(map(len, ports), default=0)
    for link, port in ports.items():
        sys.stderr.write(f"  {link:{width}}  {port}\n")


@contextlib.contextmanager
def _signals(halt: Halt) -> Iterator[None]:
    """SIGINT and SIGTERM ask for the end; only the main thread can receive them."""

    def ask(number: int, frame: FrameType | None) -> None:
        halt.asked = True

    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = {number: signal.signal(number, ask) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
