"""The live shell: one task group with one task per link, the scan loop, the door's clock and the attendant."""

from __future__ import annotations

import asyncio
import signal
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

from rigd.logic.program import Program
from rigd.logic.run_end import RunEnd
from rigd.model.devices import LinkSpec
from rigd.model.events import Event
from rigd.model.orders import Request, Verb
from rigd.ports.clock import Clock
from rigd.ports.driver import Driver
from rigd.ports.journal import Journal
from rigd.runtime.alert_path import AlertPath
from rigd.runtime.attendant import NOBODY, Attendant
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.device import Device
from rigd.runtime.line import Trace
from rigd.runtime.link_owner import LinkOwner, OpenLink
from rigd.runtime.permission import Permission, watch_life
from rigd.runtime.polls import polls_of
from rigd.runtime.scan_loop import ScanLoop
from rigd.runtime.spectra import cell_readers
from rigd.runtime.vigil import Vigil

GIVE_UP_S = 30.0
"""After the guard is gone, this long is waited for the confirmation that all pumps stand [wall]."""
SNAPSHOT_S = 0.2
SIGNALS = (signal.SIGINT, signal.SIGTERM)


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the shell is given: everything concrete, chosen in ``rigd.app`` or by a test.

    ``signer``: the person in whose name the run starts; "" waits for a person at the door, unless every device says
    that it is simulated. The two descriptors are -1 without a guard. ``trace_links`` are journaled byte by byte.
    """

    program: Program
    links: Sequence[LinkSpec]
    drivers: Mapping[str, Driver]
    open_link: OpenLink
    journal: Journal
    clock: Clock
    wall_ns: Callable[[], int]
    suspended_ns: Callable[[], int]
    signer: str = ""
    alerts: AlertPath | None = None
    ticket_fd: int = -1
    life_fd: int = -1
    trace_links: frozenset[str] = frozenset()
    handle_signals: bool = False


@dataclass(slots=True)
class Live:
    """One run. ``tell`` hands events on (the door), ``refresh`` is called a few times a second (snapshots)."""

    given: Surroundings
    tell: Callable[[Sequence[Event]], None] = lambda events: None
    refresh: Callable[[], None] = lambda: None
    inbox: CoreInbox = field(init=False)
    devices: list[Device] = field(init=False)
    owners: list[LinkOwner] = field(init=False)
    loop: ScanLoop = field(init=False)
    attendant: Attendant = field(init=False)
    orderly: bool = True
    _vigil: Vigil = field(init=False)
    _permission: Permission = field(init=False)
    _signals: int = 0
    _ended: asyncio.Future[RunEnd] = field(init=False)

    def __post_init__(self) -> None:
        given, rig = self.given, self.given.program.rig
        self.inbox = CoreInbox(prompt_tags(given.program))
        derive = cell_readers(rig, given.program.recipe)
        self.devices = [
            Device(spec, given.drivers[spec.id], polls_of(rig, spec), self.inbox, given.clock, derive.get(spec.id))
            for spec in rig.devices
        ]
        for device in self.devices:
            device.spectrum_taken = given.journal.spectrum
        self.owners = [self._owner(link) for link in given.links]
        of_unit = {d.spec.unit: owner for owner in self.owners for d in owner.devices if d.spec.unit}
        self._vigil = Vigil(rig.scan_ns, given.clock.pace, given.journal, given.wall_ns, given.suspended_ns)
        if given.alerts is not None:
            self._vigil.alerts = given.alerts.fault
        self._permission = Permission(given.ticket_fd, given.wall_ns)
        self.loop = ScanLoop(
            given.program, self.inbox, of_unit, given.journal, given.clock, self._vigil, self._permission
        )
        self.attendant = Attendant(self.inbox, given.clock, self.devices)
        self.loop.listeners += [self.attendant.hear, self._hand_on, *(reader.hear for reader in derive.values())]
        for reader in derive.values():
            reader.keep(given.journal.spectrum)

    def submit(self, request: Request) -> None:
        """Put a request from outside into the next scan."""
        self.inbox.add_request(request)

    async def run(self) -> RunEnd:
        """Run until the core, the attendant or a third signal ends it. A bug in any task ends all of them at once,
        without a last word, so that the guard stops the rig."""
        self._ended = asyncio.get_running_loop().create_future()
        watch_life(self.given.life_fd, self._guard_lost)
        if self.given.handle_signals:
            for number in SIGNALS:
                asyncio.get_running_loop().add_signal_handler(number, self.signalled)
            signal.pthread_sigmask(signal.SIG_UNBLOCK, SIGNALS)  # the guard starts control with them blocked
        async with asyncio.TaskGroup() as group:
            tasks = [group.create_task(owner.run(), name=f"link[{owner.spec.id}]") for owner in self.owners]
            tasks += [
                group.create_task(self._scans(), name="scan"),
                group.create_task(self._refreshes(), name="door"),
                group.create_task(self._attends(), name="attendant"),
            ]
            end = await self._ended
            for task in tasks:
                task.cancel()
        return end

    def say_end(self, end: RunEnd) -> None:
        """Tell the guard that nothing needs to be taken over; not after a disorderly end."""
        if self.orderly:
            self._permission.say_end(end.exit_code, end.text)

    def signalled(self) -> None:
        """SIGINT or SIGTERM: the first asks for a quench, the second for a cut, the third ends control as it is."""
        self._signals += 1
        if self._signals > 2:
            self.orderly = False
            self._end(RunEnd("stopped", 1, "ended by a third signal before the rig confirmed its stop"))
        else:
            self._wish(Verb.STOP if self._signals == 1 else Verb.CUT, "signal")

    async def _scans(self) -> None:
        self._end(await self.loop.run())

    async def _refreshes(self) -> None:
        while True:
            await asyncio.sleep(SNAPSHOT_S)
            self.refresh()

    async def _attends(self) -> None:
        end = await self.attendant.reach_all()
        who = self.given.signer or (NOBODY if self.attendant.all_simulated() else "")
        if end is None and who:
            end = await self.attendant.start(who)
        if end is not None and not self._signals:
            self._end(end)

    def _guard_lost(self) -> None:
        """The next scan cuts (``FAULT-GUARD``); end also when that is not confirmed: nobody is left to take over."""
        self._vigil.guard_lost = True
        gone = RunEnd("stopped", 1, "the guard process is gone and the stop was not confirmed; look at the rig")
        asyncio.get_running_loop().call_later(GIVE_UP_S, self._end, gone)

    def _wish(self, verb: Verb, who: str) -> None:
        self.attendant.ask(verb, who)

    def _end(self, end: RunEnd) -> None:
        if not self._ended.done():
            self._ended.set_result(end)

    def _hand_on(self, events: Sequence[Event]) -> None:
        self.tell(events)

    def _owner(self, link: LinkSpec) -> LinkOwner:
        given = self.given
        own = [device for device in self.devices if device.spec.link == link.id]
        trace = self._trace(link.id) if link.id in given.trace_links else None
        return LinkOwner(link, own, given.open_link, self.inbox, given.clock, given.wall_ns, trace)

    def _trace(self, link: str) -> Trace:
        def seen(sent: bool, data: bytes) -> None:
            self.given.journal.bytes_seen(link, self.given.clock.now_ns(), sent, data)

        return seen


def prompt_tags(program: Program) -> frozenset[str]:
    """Tags whose samples start a scan at once: those that an interlock looks at."""
    causes = [cause for interlock in program.interlocks for cause in interlock.causes]
    watched = {watch.tag for interlock in program.interlocks for watch in program.causes.get(interlock.id, ())}
    return frozenset(watched | {cause.reference for cause in causes if cause.reference}) - {""}
