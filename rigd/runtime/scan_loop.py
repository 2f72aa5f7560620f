"""The heart of the live shell: take what came, record it, let the core decide, send what it ordered.

House rules. (1) Inputs are recorded before they are acted on. (2) What protect orders has left before conduct is
entered. (3) No await between taking the inputs and handing over protect's orders. (4) A scan starts at once for a
prompt input, at the core's wake time, and at the latest one scan period after the last.
"""

from __future__ import annotations

import asyncio
from collections.abc import Callable, Mapping, Sequence

from rigd.logic import scan as core
from rigd.logic.program import Program
from rigd.logic.run_end import RunEnd
from rigd.model.events import Event
from rigd.model.orders import Order, Result
from rigd.ports.clock import Clock
from rigd.ports.journal import Journal
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.link_owner import LinkOwner
from rigd.runtime.permission import Permission
from rigd.runtime.vigil import Vigil

NS = 1_000_000_000
AFTERMATH_NS = 2 * NS
"""Process time that is still recorded after the core said that the run is over."""
AFTERMATH_WALL_S = 0.3
YIELDS = 4
"""Turns of the loop in which the link tasks wake and put protect's orders on the wire."""

Listener = Callable[[Sequence[Event]], None]


class ScanLoop:
    """Owns the core's state. ``run`` returns how the run ended."""

    def __init__(
        self,
        program: Program,
        inbox: CoreInbox,
        owners: Mapping[str, LinkOwner],
        journal: Journal,
        clock: Clock,
        vigil: Vigil,
        permission: Permission,
    ) -> None:
        self._program, self._inbox, self._journal, self._clock = program, inbox, journal, clock
        self._vigil, self._permission = vigil, permission
        self._owner_of = owners
        self._state = core.initial(program, clock.now_ns())
        self._number = 0
        self._wake_ns = 0
        self.listeners: list[Listener] = []

    @property
    def state(self) -> core.CoreState:
        """What the core remembers after the last scan."""
        return self._state

    def snapshot(self) -> dict[str, object]:
        """The core's own view of the rig now."""
        return core.snapshot(self._program, self._state, self._clock.now_ns())

    async def run(self) -> RunEnd:
        """Scan until the run is over and its aftermath is recorded."""
        end: RunEnd | None = None
        last_ns = last_s = 0.0
        loop = asyncio.get_running_loop()
        while end is None or self._clock.now_ns() < last_ns or loop.time() < last_s:
            await self._wait()
            await self.scan()
            if end is None and (end := core.run_end(self._program, self._state)) is not None:
                last_ns, last_s = self._clock.now_ns() + AFTERMATH_NS, loop.time() + AFTERMATH_WALL_S
        return end

    async def scan(self) -> None:
        """One scan, in the stages of ``rigd.model.ticket.STAGES``."""
        self._number += 1
        number, now_ns = self._number, self._clock.now_ns()
        if number == 1:
            self._state = core.initial(self._program, now_ns)  # the journal begins here, and so must a replay
        intake = self._inbox.take(self._vigil.faults())
        self._journal.scan(number, now_ns, self._clock.utc(), intake)
        self._permission.done(number, "intake")
        first = core.protect(self._program, self._state, intake, now_ns)
        self._permission.done(number, "protect")
        self._dispatch(first.orders)
        if first.orders:
            for _ in range(YIELDS):
                await asyncio.sleep(0)
        self._permission.done(number, "protect orders")
        second = core.conduct(self._program, first.state, intake, now_ns)
        self._permission.done(number, "conduct")
        self._dispatch(second.orders)
        self._permission.done(number, "conduct orders")
        self._state = second.state
        self._wake_ns = min(first.wake_ns, second.wake_ns, now_ns + self._program.rig.scan_ns)
        events = (*first.events, *second.events)
        self._journal.decided(number, (*first.orders, *second.orders), events)
        self._permission.done(number, "record")
        self._permission.offer(number)
        if events:
            for listener in self.listeners:
                listener(events)

    def _dispatch(self, orders: Sequence[Order]) -> None:
        for order in orders:
            owner = self._owner_of.get(order.unit)
            if owner is None:
                detail = f"{order.unit} is moved by hand"
                self._inbox.add_outcome(order, Result.REFUSED, self._clock.now_ns(), detail)
            else:
                owner.post(order)

    async def _wait(self) -> None:
        """Until something prompt arrives or the wake time has come; always lets the other tasks run once."""
        prompt = self._inbox.prompt
        left_s = (self._wake_ns - self._clock.now_ns()) / self._clock.pace / NS
        if prompt.is_set() or left_s <= 0:
            await asyncio.sleep(0)
            return
        handle = asyncio.get_running_loop().call_later(left_s, prompt.set)
        try:
            await prompt.wait()
        finally:
            handle.cancel()
