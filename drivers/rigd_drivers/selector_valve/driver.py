"""Driver of the selector valve."""

from __future__ import annotations

from collections.abc import Sequence

from rigd.model.devices import VALVE_CHANNELS, DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, LocalProtocolError
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.conversation import Conversation, Unsuitable
from rigd_drivers.options import check_spec, read_options, refuse, schema_of
from rigd_drivers.selector_valve import wire
from rigd_drivers.selector_valve.settings import ValveOptions

DIALECTS = ("bracket",)


class SelectorValve:
    """Implements ``rigd.ports.driver.Driver``."""

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=True)
        self._spec = spec
        self._options = read_options(spec, ValveOptions)
        self._declared = _names(spec.facts.get("positions"))
        self._count = len(self._declared) or wire.POSITIONS_MAX
        self._talk = Conversation(spec)
        self._refuse_other_rest()

    async def identify(self, line: Line) -> DeviceIdentity:
        """Model and serial number."""
        return await self._talk.identify(line, wire.MODEL)

    async def prepare(self, line: Line) -> bool:
        """Set the communication time-out, compare the number of positions with the rig file."""
        restarted = await self._talk.settle_in(line, self._options.silence)
        self._count = await self._talk.ask(line, wire.POSITIONS, wire.positions)
        if self._declared and self._count != len(self._declared):
            raise Unsuitable(
                f"{self._spec.id}: the valve has {self._count} positions, the rig file names {len(self._declared)} "
                f"({', '.join(self._declared)}); name them all, in the order of the valve"
            )
        if restarted:
            await self._talk.seen(line)
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """Where it is: an index, ``VALVE_MOVING`` or ``VALVE_LOST``."""
        for channel in channels:
            if channel not in VALVE_CHANNELS:
                raise LocalProtocolError(f"a selector valve has no channel {channel!r}; it has {VALVE_CHANNELS[0]}")
        place = await self._talk.ask(line, wire.AT, wire.position)
        if place >= self._count:
            raise DeviceProtocolError(f"{self._spec.id}: says position {place + 1}, but has {self._count}")
        fault = await self._talk.watch(line)
        return [Reading(channel, float(place), fault=fault) for channel in channels]

    async def execute(self, line: Line, order: Order) -> None:
        """One move, accepted by the valve's ``ok``; ``position`` tells when it has arrived."""
        await self._talk.order(line, wire.order_words(order.action, order.value, self._count))

    def last_will(self, link: LinkSpec) -> LastWill:
        """To rest; then there."""
        frames, check = wire.will_frames(self._talk.address, link.reply_timeout_s)
        return LastWill(self._spec.id, link, frames, check)

    def _refuse_other_rest(self) -> None:
        rest = self._spec.facts.get("rest")
        if self._declared and rest is not None and rest != self._declared[wire.REST]:
            raise refuse(
                self._spec,
                "rest-wrong",
                "rest",
                f"the rig file lets this valve rest in {rest!r}, but by itself it goes to its first position, "
                f"{self._declared[wire.REST]!r}",
                f"plumb the valve so that {rest!r} is its first position, and name that first",
            )


def _names(positions: object) -> tuple[str, ...]:
    return tuple(str(name) for name in positions) if isinstance(positions, (list, tuple)) else ()


FAMILY = DriverFamily(
    name="selector-valve",
    contract=CONTRACT,
    title="selector valve with 2 to 10 positions",
    dialects=DIALECTS,
    channels=VALVE_CHANNELS,
    actions=(Action.MOVE,),
    make=SelectorValve,
    options_schema=lambda dialect: schema_of(ValveOptions),
)
