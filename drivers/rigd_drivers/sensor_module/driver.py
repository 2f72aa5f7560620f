"""Driver of the sensor module. It moves nothing: no orders, and a last will without frames."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Order
from rigd.model.samples import Reading
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.conversation import Conversation, Unsuitable
from rigd_drivers.options import check_spec, read_options, schema_of
from rigd_drivers.sensor_module import wire
from rigd_drivers.sensor_module.settings import SensorOptions

DIALECTS = ("bracket",)


class SensorModule:
    """Implements ``rigd.ports.driver.Driver``. One ``read?`` answers all channels."""

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=True)
        read_options(spec, SensorOptions)
        self._spec = spec
        self._talk = Conversation(spec)

    async def identify(self, line: Line) -> DeviceIdentity:
        """Model and serial number."""
        return await self._talk.identify(line, wire.MODEL)

    async def prepare(self, line: Line) -> bool:
        """Compare the converter spans with the rig file: a wrong span is a wrong pressure."""
        restarted = await self._talk.settle_in(line, None)
        spans = self._spec.facts.get("spans")
        if isinstance(spans, Mapping):
            for channel, (low, high) in spans.items():
                await self._compare(line, channel, float(low), float(high))
        if restarted:
            await self._talk.seen(line)
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """Values with their raw codes; a broken input has ``fault`` set and no number."""
        words = wire.read_words(channels)
        found = await self._talk.ask(line, words, lambda answer: wire.readings(answer, channels))
        fault = await self._talk.watch(line)
        return [_marked(reading, fault) for reading in found] if fault else found

    async def execute(self, line: Line, order: Order) -> None:
        """There is nothing to order."""
        raise LocalProtocolError(f"a sensor module cannot {order.action.value}")

    def last_will(self, link: LinkSpec) -> LastWill:
        """Nothing moves, nothing to stop."""
        return LastWill(self._spec.id, link, ())

    async def _compare(self, line: Line, channel: str, low: float, high: float) -> None:
        found = await self._talk.ask(line, ("span?", channel), wire.span)
        unit = wire.UNITS[channel[0]]
        within = 0.001 * (high - low)
        if found.unit != unit or abs(found.low - low) > within or abs(found.high - high) > within:
            raise Unsuitable(
                f"{self._spec.id}: input {channel} has a span of {found.low:g} to {found.high:g} {found.unit}, the rig "
                f"file {low:g} to {high:g} {unit}; correct the one that is wrong"
            )


def _marked(reading: Reading, fault: str) -> Reading:
    return Reading(reading.channel, reading.value, reading.raw, reading.fault or fault)


FAMILY = DriverFamily(
    name="sensor-module",
    contract=CONTRACT,
    title="module for pressures and temperatures",
    dialects=DIALECTS,
    channels=wire.CHANNELS,
    actions=(),
    make=SensorModule,
    options_schema=lambda dialect: schema_of(SensorOptions),
)
