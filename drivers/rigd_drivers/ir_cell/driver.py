"""Driver of the IR flow cell. It moves nothing: no orders, and a last will without frames."""

from __future__ import annotations

from collections.abc import Sequence

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Order
from rigd.model.samples import Reading, Spectrum
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.conversation import Conversation
from rigd_drivers.ir_cell import wire
from rigd_drivers.ir_cell.settings import CellOptions
from rigd_drivers.options import check_spec, read_options, schema_of

DIALECTS = ("bracket",)
CHANNELS = ("count",)
SPECTRUM_TIMEOUT_S = 1.0
"""The cell thinks for up to 150 ms and the longest reply takes 356 ms on the wire (4096 bytes, 10 bits, 115 200 baud);
doubled, because a computer may be slow too."""


class IrCell:
    """Implements ``rigd.ports.driver.Driver`` and ``SpectrumSource``."""

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=True)
        read_options(spec, CellOptions)
        self._spec = spec
        self._talk = Conversation(spec)
        self._grid: wire.Grid | None = None
        self._count = 0
        self._taken = wire.NONE_YET

    async def identify(self, line: Line) -> DeviceIdentity:
        """Model and serial number."""
        return await self._talk.identify(line, wire.MODEL)

    async def prepare(self, line: Line) -> bool:
        """Learn the grid."""
        restarted = await self._talk.settle_in(line, None)
        self._grid = await self._talk.ask(line, wire.GRID, wire.grid)
        self._count, self._taken = 0, wire.NONE_YET
        if restarted:
            await self._talk.seen(line)
        return restarted

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """How many spectra are finished: a new number says that ``spectrum`` has something new."""
        for channel in channels:
            if channel not in CHANNELS:
                raise LocalProtocolError(f"an IR cell has no channel {channel!r}; it has {CHANNELS[0]}")
        count = await self._talk.ask(line, wire.COUNT, wire.count)
        self._notice(count)
        fault = await self._talk.watch(line)
        return [Reading(channel, float(count), count, fault) for channel in channels]

    async def spectrum(self, line: Line) -> Spectrum:
        """The last finished spectrum; without points before the first; the same again while nothing new is finished.

        Asks for the count first: 30 bytes instead of a thousand when there is nothing new.
        """
        grid = self._grid
        if grid is None:
            grid = self._grid = await self._talk.ask(line, wire.GRID, wire.grid)
        points, count = grid.points, await self._talk.ask(line, wire.COUNT, wire.count)
        self._notice(count)
        if count == self._taken.count:
            return self._spectrum(grid, self._taken)
        finished = await self._talk.ask(
            line, wire.SPECTRUM, lambda words: wire.spectrum(words, points), timeout_s=SPECTRUM_TIMEOUT_S
        )
        self._notice(finished.count)
        self._taken = finished
        return self._spectrum(grid, finished)

    async def execute(self, line: Line, order: Order) -> None:
        """There is nothing to order."""
        raise LocalProtocolError(f"an IR cell cannot {order.action.value}")

    def last_will(self, link: LinkSpec) -> LastWill:
        """Nothing moves, nothing to stop."""
        return LastWill(self._spec.id, link, ())

    def _spectrum(self, grid: wire.Grid, finished: wire.Finished) -> Spectrum:
        return Spectrum(self._spec.id, 0, grid.start_per_cm, grid.step_per_cm, finished.absorbance)

    def _notice(self, count: int) -> None:
        if count < self._count:
            raise self._talk.restarted()
        self._count = count


FAMILY = DriverFamily(
    name="ir-cell",
    contract=CONTRACT,
    title="in-line IR flow cell",
    dialects=DIALECTS,
    channels=CHANNELS,
    actions=(),
    make=IrCell,
    options_schema=lambda dialect: schema_of(CellOptions),
)
