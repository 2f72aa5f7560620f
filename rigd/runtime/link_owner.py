"""The one task that owns a link and everything that is said on it.

House rules. (1) One call at a time on a link. (2) Orders of the trip lane come before everything; a call that
consists of several exchanges is broken off between two of them when a trip order arrives. (3) Then reads that are
late, then other orders, then reads that are due, then attempts to reach what is not there. (4) Every call has a
deadline. (5) A STOP is tried even on a device that has not answered lately; any other order to such a device fails at
once. (6) Every order gets exactly one outcome.
"""

from __future__ import annotations

import asyncio
from collections.abc import Awaitable, Callable, Sequence
from typing import TypeVar

from rigd.model.devices import LinkSpec
from rigd.model.errors import DeviceRefused, LinkClosed, LinkError, LinkTimeout, ProtocolError
from rigd.model.orders import Action, Order, Result
from rigd.ports.clock import Clock
from rigd.ports.link import Line, Link, ReplyReader
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.device import NS, RETRY_NS, Device
from rigd.runtime.line import LinkLine, Trace
from rigd.runtime.mailbox import Mailbox, is_trip

T = TypeVar("T")

OPEN_S = 5.0
CALL_S = 5.0
"""No call on a device may take longer [wall]; its single exchanges have their own, shorter deadlines."""

OpenLink = Callable[[LinkSpec], Awaitable[Link]]
WallNs = Callable[[], int]


class Interrupted(Exception):
    """A call was broken off because a trip order waits. Deliberately no ``RigError``: no driver may handle it."""


class _PatientLine:
    """The line for everything that is not a trip order: gives way between two exchanges."""

    def __init__(self, line: Line, mailbox: Mailbox) -> None:
        self._line, self._mailbox = line, mailbox
        self.used = False

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        if self._mailbox.tripping:
            raise Interrupted
        self.used = True
        return await self._line.ask(request, reader, timeout_s=timeout_s)


class LinkOwner:
    """Opens the port, keeps it open, serves its devices; ``run`` ends only by cancellation."""

    def __init__(
        self,
        spec: LinkSpec,
        devices: Sequence[Device],
        open_link: OpenLink,
        core: CoreInbox,
        clock: Clock,
        wall_ns: WallNs,
        trace: Trace | None = None,
    ) -> None:
        self.spec, self.devices = spec, tuple(devices)
        self._open_link, self._core, self._clock, self._wall_ns, self._trace = open_link, core, clock, wall_ns, trace
        self._mailbox = Mailbox()
        self._by_unit = {device.spec.unit: device for device in devices if device.spec.unit}
        self.alive_ns = wall_ns()

    def post(self, order: Order) -> None:
        """Take an order for one of this link's units; what it makes void is told to the core."""
        for void in self._mailbox.post(order):
            self._tell(void, Result.SUPERSEDED, f"by order {order.number}")

    async def run(self) -> None:
        """Open, serve, open again when the port was lost."""
        attempts = 0
        while True:
            try:
                link = await self._open()
            except LinkError as error:
                await self._without_port(str(error), RETRY_NS[min(attempts, len(RETRY_NS) - 1)])
                attempts += 1
                continue
            attempts = 0
            try:
                await self._serve(
                    LinkLine(link, name=self.spec.id, timeout_s=self.spec.reply_timeout_s, trace=self._trace)
                )
            except LinkClosed as error:
                await self._without_port(str(error), RETRY_NS[0])
            finally:
                await link.close()

    async def _open(self) -> Link:
        self.alive_ns = self._wall_ns()
        try:
            async with asyncio.timeout(OPEN_S):
                return await self._open_link(self.spec)
        except TimeoutError as error:
            raise LinkTimeout(f"{self.spec.port} could not be opened within {OPEN_S:g} s") from error

    async def _without_port(self, reason: str, pause_ns: int) -> None:
        """Say that all devices are lost, and answer orders until it is time to try again."""
        for device in self.devices:
            device.lost(reason)
        until_ns = self._wall_ns() + pause_ns
        while (left_ns := until_ns - self._wall_ns()) > 0:
            self.alive_ns = self._wall_ns()
            for order in self._mailbox.take_all():
                self._tell(order, Result.FAILED, reason)
            await self._rest(left_ns / NS)

    async def _serve(self, line: LinkLine) -> None:
        while True:
            self.alive_ns = self._wall_ns()
            if order := self._mailbox.take_trip():
                await self._carry_out(line, order, None)
            elif not await self._next_job(line):
                await self._rest(self._idle_s())

    async def _next_job(self, line: LinkLine) -> bool:
        """One thing that is not a trip order; False when nothing is to be done now."""
        patient = _PatientLine(line, self._mailbox)
        now_ns, wall_ns = self._clock.now_ns(), self._wall_ns()
        usable = [device for device in self.devices if device.link.usable]
        due_ns, device = min(((d.next_poll_ns()[0], d) for d in usable), key=_first, default=(2**62, None))
        late = device is not None and now_ns - due_ns > device.polls[device.next_poll_ns()[1]].period_ns
        if not late and (order := self._mailbox.take_normal()):
            await self._carry_out(patient, order, patient)
        elif device is not None and due_ns <= now_ns:
            await self._call(device.poll(patient, device.next_poll_ns()[1]), device)
        elif unsure := next((d for d in usable if d.recognise_wall_ns <= wall_ns), None):
            await self._call(unsure.recognise(patient, wall_ns), unsure)
        elif lost := next((d for d in self.devices if not d.link.usable and d.retry_wall_ns <= wall_ns), None):
            await self._call(lost.bring_up(patient, wall_ns), lost)
        else:
            return False
        return True

    async def _call(self, call: Awaitable[None], device: Device) -> None:
        """Wait for a call on a device, with a deadline; an interrupted one simply comes again."""
        try:
            async with asyncio.timeout(CALL_S):
                await call
        except Interrupted:
            pass
        except TimeoutError:
            device.lost(f"a call took longer than {CALL_S:g} s")

    async def _carry_out(self, line: Line, order: Order, patient: _PatientLine | None) -> None:
        device = self._by_unit[order.unit]
        if not device.link.usable and not is_trip(order):
            self._tell(order, Result.FAILED, f"{device.spec.id} is {device.link.state}: {device.detail}")
            return
        try:
            async with asyncio.timeout(CALL_S):
                await device.execute(line, order)
        except DeviceRefused as error:
            self._tell(order, Result.REFUSED, str(error))
        except (LinkError, ProtocolError) as error:
            self._tell(order, Result.FAILED, str(error))
            if isinstance(error, LinkClosed):
                raise
        except TimeoutError:
            self._tell(order, Result.FAILED, f"not done within {CALL_S:g} s")
        except Interrupted:
            self._interrupted(order, patient is not None and patient.used)
        else:
            self._tell(order, Result.DONE, "")

    def _interrupted(self, order: Order, begun: bool) -> None:
        """An order that was not begun comes again after the trip; a half-said one fails, and the core decides."""
        if begun and order.action in (Action.FILL, Action.SWAP):
            self._tell(order, Result.FAILED, "interrupted by a stop")
        elif not self._mailbox.put_back(order):
            self._tell(order, Result.SUPERSEDED, "by a stop")

    def _idle_s(self) -> float:
        """Wall time until something is due, at most a second."""
        usable = [device for device in self.devices if device.link.usable]
        due_ns = min((device.next_poll_ns()[0] for device in usable), default=2**62)
        to_poll_s = (due_ns - self._clock.now_ns()) / self._clock.pace / NS
        asked_ns = (d.recognise_wall_ns if d.link.usable else d.retry_wall_ns for d in self.devices)
        retry_ns = min(asked_ns, default=2**62)
        return max(0.0, min(1.0, to_poll_s, (retry_ns - self._wall_ns()) / NS))

    async def _rest(self, seconds: float) -> None:
        """Wait for an order, at most ``seconds``."""
        wake = self._mailbox.wake
        wake.clear()
        if self._mailbox.tripping:
            return
        handle = asyncio.get_running_loop().call_later(seconds, wake.set)
        try:
            await wake.wait()
        finally:
            handle.cancel()

    def _tell(self, order: Order, result: Result, detail: str) -> None:
        self._core.add_outcome(order, result, self._clock.now_ns(), detail)


def _first(pair: tuple[int, Device]) -> int:
    return pair[0]
