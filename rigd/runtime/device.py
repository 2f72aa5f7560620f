"""One device as the runtime sees it: its driver, who it said it is, its link state and when it is due to be read."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from rigd.model.devices import DeviceIdentity, DeviceSpec, DeviceStatus
from rigd.model.errors import DeviceRefused, LinkClosed, LinkError, ProtocolError, RigError, WrongDevice
from rigd.model.orders import Order
from rigd.model.samples import Reading, Sample, Spectrum
from rigd.ports.clock import Clock
from rigd.ports.driver import Driver, SpectrumSource
from rigd.ports.link import Line
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.link_state import LinkStatus
from rigd.runtime.polls import Poll, next_due_ns, samples_of

Derive = Callable[[Spectrum], Sequence[Reading]]
NS = 1_000_000_000
RETRY_NS = (NS // 2, NS, 2 * NS, 5 * NS)
"""Pauses between attempts to reach a device that is not there [wall]: growing, so that it does not eat a shared
line."""
RECOGNISE_NS = 10 * NS
"""How often a device is asked again who it is [wall]."""


class Device:
    """All calls come from the one task that owns the link; nothing here waits for anything but the device.

    ``LinkClosed`` always goes on to the owner of the link: it concerns all devices of it.
    """

    def __init__(
        self,
        spec: DeviceSpec,
        driver: Driver,
        polls: Sequence[Poll],
        core: CoreInbox,
        clock: Clock,
        derive: Derive | None = None,
    ) -> None:
        self.spec, self._driver, self._core, self._clock, self._derive = spec, driver, core, clock, derive
        self.link = LinkStatus()
        self.identity: DeviceIdentity | None = None
        self.detail = "not reached yet"
        self.polls = tuple(polls)
        self.due_ns = [0] * len(self.polls)
        self.retry_wall_ns = self.recognise_wall_ns = 0
        self.spectrum_taken: Callable[[Spectrum], None] = lambda spectrum: None
        self._attempts = 0
        self._prepared = False
        self._start_ns = 0
        self._last_absorbance: tuple[float, ...] = ()

    async def bring_up(self, line: Line, wall_ns: int) -> None:
        """Identify and prepare; ends online or failed, and never raises but for a closed link or a cancellation."""
        self._changed(self.link.bring_up(), "")
        try:
            identity = await self._driver.identify(line)
            self._check(identity)
            power_cycled = await self._driver.prepare(line) and self._prepared
        except LinkClosed:
            raise
        except (LinkError, ProtocolError, DeviceRefused, WrongDevice) as error:
            pause_ns = RETRY_NS[min(self._attempts, len(RETRY_NS) - 1)]
            self._attempts += 1
            self.retry_wall_ns = wall_ns + pause_ns
            self._changed(self.link.lose(), str(error))
            return
        self.identity, self._prepared, self._attempts = identity, True, 0
        self.recognise_wall_ns = wall_ns + RECOGNISE_NS
        self._start_ns = self._clock.now_ns()
        self.due_ns = [self._start_ns] * len(self.polls)
        self._changed(self.link.arrive(), "", power_cycled)

    async def recognise(self, line: Line, wall_ns: int) -> None:
        """Ask again who is there: a device that was exchanged between two polls would answer them all the same."""
        self.recognise_wall_ns = wall_ns + RECOGNISE_NS
        try:
            self._check(await self._driver.identify(line))
        except LinkClosed:
            raise
        except WrongDevice as error:
            self._changed(self.link.lose(), str(error))
        except (LinkError, ProtocolError, DeviceRefused) as error:
            self._missed(error)
        else:
            self._answered()

    async def poll(self, line: Line, index: int) -> None:
        """Read one group of channels and hand its samples to the core."""
        poll = self.polls[index]
        asked_ns = self._clock.now_ns()  # a sample is never called younger than its question
        try:
            samples = await self._spectrum(line, poll, asked_ns) if poll.spectrum else await self._read(line, poll)
        except LinkClosed:
            raise
        except (LinkError, ProtocolError, DeviceRefused) as error:
            self._missed(error)
        else:
            self._answered()
            self._core.add_samples(samples)
        finally:
            self.due_ns[index] = next_due_ns(self._start_ns, poll.period_ns, self._clock.now_ns())

    async def execute(self, line: Line, order: Order) -> None:
        """Carry out one order; raises what the driver raises, after noting it."""
        try:
            await self._driver.execute(line, order)
        except DeviceRefused:
            self._answered()
            raise
        except LinkClosed:
            raise
        except (LinkError, ProtocolError) as error:
            self._missed(error)
            raise
        self._answered()

    def lost(self, reason: str) -> None:
        """The port is gone; come back as soon as it is there again."""
        self._attempts, self.retry_wall_ns = 0, 0
        self._changed(self.link.lose(), reason)

    def next_poll_ns(self) -> tuple[int, int]:
        """(due time, index) of the poll that is due first; the index is -1 without polls."""
        if not self.due_ns:
            return 2**62, -1
        due_ns = min(self.due_ns)
        return due_ns, self.due_ns.index(due_ns)

    async def _read(self, line: Line, poll: Poll) -> list[Sample]:
        asked_ns = self._clock.now_ns()
        return samples_of(poll, await self._driver.poll(line, poll.channels), asked_ns)

    async def _spectrum(self, line: Line, poll: Poll, asked_ns: int) -> list[Sample]:
        source: SpectrumSource = self._driver  # type: ignore[assignment]
        told = await source.spectrum(line)
        if not told.absorbance or told.absorbance == self._last_absorbance or self._derive is None:
            return []  # the same one as before: a detector that stands still turns stale, as it should
        self._last_absorbance = told.absorbance
        spectrum = Spectrum(self.spec.id, asked_ns, told.start_per_cm, told.step_per_cm, told.absorbance)
        self.spectrum_taken(spectrum)
        return samples_of(poll, self._derive(spectrum), asked_ns)

    def _check(self, identity: DeviceIdentity) -> None:
        """Raises ``WrongDevice`` when another one answers than the rig file, or this run, knows."""
        wanted = self.spec.serial_no or (self.identity.serial_no if self.identity else "")
        who = f"serial number {identity.serial_no!r} ({identity.maker} {identity.model})"
        if wanted and identity.serial_no != wanted:
            raise WrongDevice(f"{self.spec.id}: {who} answers, {wanted!r} is expected")
        known = self.identity
        if known is not None and (identity.maker, identity.model) != (known.maker, known.model):
            raise WrongDevice(f"{self.spec.id}: {who} answers where a {known.maker} {known.model} was")

    def _answered(self) -> None:
        self._changed(self.link.answer(), "")

    def _missed(self, error: RigError) -> None:
        self._changed(self.link.miss(), str(error))

    def _changed(self, changed: bool, detail: str, power_cycled: bool = False) -> None:
        if changed:
            self.detail = detail
            status = DeviceStatus(
                self.spec.id, self.link.state, self._clock.now_ns(), detail, self.identity, power_cycled
            )
            self._core.add_link(status)
