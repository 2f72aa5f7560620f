"""What a device driver must do. Contract version 1; ``rigd.conformance`` is the battery that it must pass."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading, Spectrum
from rigd.ports.link import Line

CONTRACT = 1


class Driver(Protocol):
    """One device. Owns no port, no clock and no task: each call gets the line it may use.

    A call is one or a few exchanges; the runtime repeats polls, reconnects, and never overlaps two calls on one link.
    Every method may raise ``LinkError``, ``ProtocolError``, ``DeviceRefused`` and nothing else; ``identify`` and
    ``prepare`` also ``WrongDevice``. A poll that shows a restart raises ``DeviceProtocolError`` until ``prepare``.
    """

    async def identify(self, line: Line) -> DeviceIdentity:
        """Ask who is there; called at every open of the port, before anything else."""

    async def prepare(self, line: Line) -> bool:
        """Set what the device must know (communication time-out, syringe size), read it back.

        Returns True when the device says that it has restarted since it was last prepared (power-on flag).
        """

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """Read these channels; as few exchanges as the device allows. A channel that fails gets ``fault`` set."""

    async def execute(self, line: Line, order: Order) -> None:
        """Carry out one order and check what can be checked at once. Raises ``DeviceRefused`` for a plain no.

        Must be safe to repeat: STOP always; DELIVER, MOVE and set-points because they state a target.
        """

    def last_will(self, link: LinkSpec) -> LastWill:
        """The exact bytes that make this device safe, for the guard. Pure."""


class SpectrumSource(Protocol):
    """What an IR-cell driver offers besides ``Driver``."""

    async def spectrum(self, line: Line) -> Spectrum:
        """The latest finished spectrum (``t_ns`` 0: the runtime stamps it); without points before the first one."""


@dataclass(frozen=True, slots=True)
class DriverFamily:
    """What the entry point group ``rigd.drivers`` must resolve to.

    ``make`` raises ``ConfigError`` with one ``Problem`` per wrong option. ``options_schema`` is the JSON Schema of the
    device table's extra keys for one dialect (or "" for all).
    """

    name: str
    contract: int
    title: str
    dialects: tuple[str, ...]
    channels: tuple[str, ...]
    actions: tuple[Action, ...]
    make: Callable[[DeviceSpec], Driver]
    options_schema: Callable[[str], Mapping[str, object]]
