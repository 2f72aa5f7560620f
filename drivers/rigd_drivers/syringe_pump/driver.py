"""Driver of the syringe pump."""

from __future__ import annotations

from collections.abc import Sequence

from rigd.model.devices import PUMP_CHANNELS, DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Action, Order
from rigd.model.samples import Reading
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.conversation import Conversation, Unsuitable
from rigd_drivers.options import check_spec, read_options, schema_of
from rigd_drivers.syringe_pump import wire
from rigd_drivers.syringe_pump.settings import PumpOptions

DIALECTS = ("bracket",)


class SyringePump:
    """Implements ``rigd.ports.driver.Driver``. One ``status?`` answers all channels."""

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=True)
        self._spec = spec
        self._options = read_options(spec, PumpOptions)
        self._talk = Conversation(spec)
        self._delivered_mL = 0.0

    async def identify(self, line: Line) -> DeviceIdentity:
        """Model and serial number."""
        return await self._talk.identify(line, wire.MODEL)

    async def prepare(self, line: Line) -> bool:
        """Set the communication time-out, compare the mounted syringes with the rig file."""
        restarted = await self._talk.settle_in(line, self._options.silence)
        self._compare(await self._talk.ask(line, wire.BORES, wire.bores))
        self._delivered_mL = 0.0
        if restarted:
            await self._talk.seen(line)
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """All channels from one status; a counter that fell means that the pump has restarted."""
        for channel in channels:
            if channel not in PUMP_CHANNELS:
                raise LocalProtocolError(
                    f"a syringe pump has no channel {channel!r}; it has {', '.join(PUMP_CHANNELS)}"
                )
        now = await self._talk.ask(line, wire.STATUS, wire.status)
        if now.delivered_mL < self._delivered_mL:
            raise self._talk.restarted()
        self._delivered_mL = now.delivered_mL
        fault = await self._talk.watch(line) or ("the pump reports a fault" if now.fault else "")
        values = {
            "flow": Reading("flow", now.flow_mL_min),
            "level": Reading("level", now.level_mL),
            "standby": Reading("standby", now.standby_mL),
            "delivered": Reading("delivered", now.delivered_mL),
            "state": Reading("state", float(now.state), fault=fault),
        }
        return [values[channel] for channel in channels]

    async def execute(self, line: Line, order: Order) -> None:
        """One order, confirmed by the pump's ``ok``."""
        await self._talk.order(line, wire.order_words(order.action, order.value))

    def last_will(self, link: LinkSpec) -> LastWill:
        """Stop; then flow 0 in a state without motion."""
        frames, check = wire.will_frames(self._talk.address, link.reply_timeout_s)
        return LastWill(self._spec.id, link, frames, check)

    def _compare(self, found: wire.Bores) -> None:
        facts = self._spec.facts
        wrong = [
            f"{name} {has:g}, rig file {facts[key]}"
            for name, key, has, within in (
                ("number of syringes", "syringes", found.syringes, 0.0),
                ("bore [mm]", "bore_mm", found.bore_mm, 0.00501),
                ("stroke volume [mL]", "stroke_mL", found.stroke_mL, 0.000501),
            )
            if key in facts and abs(has - float(str(facts[key]))) > within
        ]
        if wrong:
            raise Unsuitable(
                f"{self._spec.id}: the pump has {'; '.join(wrong)}; every flow would be wrong. Mount the right "
                "syringes, set them at the pump, or correct the rig file"
            )


FAMILY = DriverFamily(
    name="syringe-pump",
    contract=CONTRACT,
    title="syringe pump with one or two syringes",
    dialects=DIALECTS,
    channels=PUMP_CHANNELS,
    actions=(Action.DELIVER, Action.STOP, Action.FILL, Action.SWAP),
    make=SyringePump,
    options_schema=lambda dialect: schema_of(PumpOptions),
)
