"""Driver of the chiller.

The chiller has no communication time-out: when the line is lost it keeps its set-point. That is also what its last will
means unless the rig file says ``when_lost = "off"``: a bed without cooling is the worse of the two on most rigs.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TypeVar

from rigd.model.devices import CHILLER_CHANNELS, DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, DeviceRefused, LinkTimeout, LocalProtocolError
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.chiller import wire
from rigd_drivers.chiller.settings import ChillerOptions
from rigd_drivers.conversation import Unsuitable, retries
from rigd_drivers.options import check_spec, read_options, schema_of

T = TypeVar("T")

DIALECTS = ("plain",)
JUMP_K = 1.0
"""A value that moved more than this since the last poll is asked for once more; both answers must agree."""

_QUESTIONS: dict[str, tuple[str, Callable[[str], float | None], float]] = {
    "bath": ("BATH", wire.bath, JUMP_K),
    "setpoint": ("SET", wire.setpoint, 0.0),
    "circulating": ("RUN", wire.running, 0.0),
}


class Chiller:
    """Implements ``rigd.ports.driver.Driver``."""

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=False)
        self._spec = spec
        self._options = read_options(spec, ChillerOptions)
        self._retries = retries(spec)
        self._last: dict[str, float] = {}

    async def identify(self, line: Line) -> DeviceIdentity:
        """Model and serial number. Bytes that the chiller caught while the port opened may spoil the first question."""
        try:
            who = await self._ask(line, "ID", wire.identity)
        except DeviceRefused:
            who = await self._ask(line, "ID", wire.identity)
        if who.model != wire.MODEL:
            raise Unsuitable(
                f"{self._spec.id}: {who.model} ({who.serial_no}) answers, but a {wire.MODEL} is needed; check the "
                "link in the rig file"
            )
        return who

    async def prepare(self, line: Line) -> bool:
        """Note a restart and clear its flag. Set-point and circulation stay as they are: nothing resumes by itself."""
        self._last.clear()
        restarted = (await self._ask(line, "STATUS", wire.status)).restarted
        if restarted:
            await self._ask(line, "CLEAR", wire.accepted)
            if (await self._ask(line, "STATUS", wire.status)).restarted:
                raise DeviceProtocolError(f"{self._spec.id}: still says that it has restarted after CLEAR")
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """The channels asked for, and the status: low level and faults stand at ``circulating``."""
        for channel in channels:
            if channel not in CHILLER_CHANNELS:
                raise LocalProtocolError(f"a chiller has no channel {channel!r}; it has {', '.join(CHILLER_CHANNELS)}")
        status = await self._ask(line, "STATUS", wire.status)
        if status.restarted:
            raise DeviceProtocolError(f"{self._spec.id}: has restarted and lost its set-point")
        return [
            Reading(channel, await self._value(line, channel), fault=status.trouble if channel == "circulating" else "")
            for channel in channels
        ]

    async def execute(self, line: Line, order: Order) -> None:
        """Set, then read back what is in force."""
        if order.action is Action.SET_TEMPERATURE:
            await self._set(line, wire.set_words(order.value), "setpoint")
        elif order.action is Action.CIRCULATE:
            await self._set(line, wire.run_words(order.value), "circulating")
        else:
            raise LocalProtocolError(f"a chiller cannot {order.action.value}")

    def last_will(self, link: LinkSpec) -> LastWill:
        """Nothing, or off: see ``when_lost``."""
        if self._options.when_lost == "keep":
            return LastWill(self._spec.id, link, ())
        frames, check = wire.off_frames(link.reply_timeout_s)
        return LastWill(self._spec.id, link, frames, check)

    async def _set(self, line: Line, words: str, channel: str) -> None:
        await self._ask(line, words, wire.accepted)
        question, decode, _ = _QUESTIONS[channel]
        wanted, found = float(words.split()[1]), await self._ask(line, question, decode)
        if found != wanted:
            raise DeviceProtocolError(f"{self._spec.id}: accepted {words!r}, but {question} {found:g} is in force")
        self._last[channel] = found

    async def _value(self, line: Line, channel: str) -> float:
        question, decode, jump = _QUESTIONS[channel]
        value = await self._ask(line, question, decode)
        if abs(value - self._last.get(channel, float("inf"))) > jump:
            again = await self._ask(line, question, decode)
            if abs(again - value) > jump:
                raise DeviceProtocolError(f"{self._spec.id}: {question} gave {value:g} and {again:g} at once")
            value = again
        self._last[channel] = value
        return value

    async def _ask(self, line: Line, words: str, decode: Callable[[str], T | None]) -> T:
        """Every request here states a target or asks: it may be repeated when no answer came."""
        for left in range(self._retries, -1, -1):
            try:
                return await line.ask(wire.encode(words), wire.LineReader(words, decode))
            except LinkTimeout as error:
                if not left:
                    raise LinkTimeout(f"{self._spec.id}: {error}") from error
            except DeviceRefused as error:
                raise DeviceRefused(f"{self._spec.id}: {error}") from error
        raise AssertionError("unreachable")


FAMILY = DriverFamily(
    name="chiller",
    contract=CONTRACT,
    title="circulating chiller",
    dialects=DIALECTS,
    channels=CHILLER_CHANNELS,
    actions=(Action.SET_TEMPERATURE, Action.CIRCULATE),
    make=Chiller,
    options_schema=lambda dialect: schema_of(ChillerOptions),
)
