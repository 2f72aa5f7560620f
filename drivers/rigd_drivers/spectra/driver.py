"""Drivers of the two sources. They move nothing, and nobody answers: identity is the folder or the port itself.

What is told of a spectrum is only that it is new; its time is when rigd saw it. The clock of the instrument's computer
and the times of its files are never believed.
"""

from __future__ import annotations

import asyncio
import hashlib
import json
import re
from collections.abc import Mapping, Sequence
from typing import Any, TypeVar

from rigd.model.devices import DeviceIdentity, DeviceSpec, LastWill, LinkSpec
from rigd.model.errors import DeviceProtocolError, LinkTimeout, LocalProtocolError
from rigd.model.orders import Order
from rigd.model.samples import Reading, Spectrum
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.link import Line
from rigd_drivers.options import check_spec, read_options, schema_of
from rigd_drivers.spectra.settings import FolderOptions, SpectraOptions, StreamOptions
from rigd_drivers.spectra.wire import Curve

DIALECTS = ("",)
CHANNELS = ("count", "passed_over")
AT_ONCE = 10
"""Files that are taken in one look; more wait for the next."""
REMEMBERED = 1000
"""Contents by which a doubled file is known."""
STREAM_TIMEOUT_S = 0.05
BLOCK_MAX = 1 << 20
O = TypeVar("O", bound=SpectraOptions)  # noqa: E741 - a type variable


class _Source:
    """What both share: reading, counting, doubled spectra."""

    options: SpectraOptions

    def __init__(self, spec: DeviceSpec) -> None:
        check_spec(spec, DIALECTS, addressed=False)
        self._id = spec.id
        self._curve: Curve | None = None
        self._seen: dict[bytes, None] = {}
        self._taken = self._passed_over = 0

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        """How many spectra were taken, and how many passed over: doubled, older than the last, or not to be read."""
        known = {"count": self._taken, "passed_over": self._passed_over}
        for channel in channels:
            if channel not in known:
                raise LocalProtocolError(f"a source of spectra has no channel {channel!r}; it has {', '.join(known)}")
        return [Reading(channel, float(known[channel]), known[channel]) for channel in channels]

    async def execute(self, line: Line, order: Order) -> None:
        """There is nothing to order."""
        raise LocalProtocolError(f"a source of spectra cannot {order.action.value}")

    def last_will(self, link: LinkSpec) -> LastWill:
        """Nothing moves, nothing to stop."""
        return LastWill(self._id, link, ())

    async def _take(self, data: bytes, name: str) -> None:
        """Read one; in a thread, because thousands of points take milliseconds that the loop has not."""
        mark = hashlib.sha256(data).digest()
        if mark in self._seen:
            self._passed_over += 1
            return
        try:
            self._curve = await asyncio.to_thread(self.options.read, data)
        except ValueError as error:
            self._passed_over += 1
            raise DeviceProtocolError(f"{self._id}: {name} was passed over: {error}") from error
        finally:
            self._seen[mark] = None
            while len(self._seen) > REMEMBERED:
                del self._seen[next(iter(self._seen))]
        self._taken += 1

    def _spectrum(self) -> Spectrum:
        if self._curve is None:
            return Spectrum(self._id, 0, 0.0, 1.0, ())
        return Spectrum(self._id, 0, self._curve.start_per_cm, self._curve.step_per_cm, self._curve.absorbance)


class FolderSource(_Source):
    """Files in a folder. The link tells which are new and whole; the names tell their order."""

    def __init__(self, spec: DeviceSpec) -> None:
        super().__init__(spec)
        self.options: FolderOptions = read_options(spec, FolderOptions)
        self._last: tuple[object, ...] = ()

    async def identify(self, line: Line) -> DeviceIdentity:
        """The folder that the link watches."""
        told, _ = await line.ask(_request("who"), LetterReader())
        return DeviceIdentity("rigd", "folder of spectra", str(told["folder"]))

    async def prepare(self, line: Line) -> bool:
        """Tell the link what counts; files that are there already are of before and are not read."""
        await line.ask(_request("watch", files=self.options.files, quiet_s=self.options.quiet), LetterReader())
        return False

    async def spectrum(self, line: Line) -> Spectrum:
        """The newest whole one; the same again while nothing new is there. A file that cannot be read is told once."""
        for _ in range(AT_ONCE):
            told, data = await line.ask(_request("next"), LetterReader())
            if not told["name"]:
                break
            key = natural(str(told["name"]))
            if self.options.order == "name" and key < self._last:
                self._passed_over += 1  # older than what was taken: it says nothing about now
                continue
            await self._take(data, f"file {told['name']!r}")
            self._last = key
        return self._spectrum()


class StreamSource(_Source):
    """Blocks of text that an instrument sends unasked."""

    def __init__(self, spec: DeviceSpec) -> None:
        super().__init__(spec)
        self.options: StreamOptions = read_options(spec, StreamOptions)
        self._reader = BlockReader(jcamp=self.options.format == "jcamp-dx")

    async def identify(self, line: Line) -> DeviceIdentity:
        """Nobody can be asked: it only talks. What was half heard before is forgotten."""
        self._reader = BlockReader(jcamp=self.options.format == "jcamp-dx")
        return DeviceIdentity("unknown", "stream of spectra", "unknown")

    async def prepare(self, line: Line) -> bool:
        """There is nothing to set."""
        return False

    async def spectrum(self, line: Line) -> Spectrum:
        """The last whole block; the same again while there is none."""
        for _ in range(AT_ONCE):
            try:
                block = await line.ask(b"", self._reader, timeout_s=STREAM_TIMEOUT_S)
            except LinkTimeout:
                break
            await self._take(block, "a block")
        return self._spectrum()


class LetterReader:
    """Finds a letter of the folder link: one line of JSON with ``bytes``, then so many bytes."""

    numbered = True  # the link is in this process: it never answers late or twice

    def __init__(self) -> None:
        self._kept = bytearray()

    def feed(self, data: bytes) -> tuple[Mapping[str, Any], bytes] | None:
        """(what it tells, the bytes), or None while it is not whole; ``DeviceProtocolError`` for the link's trouble."""
        self._kept += data
        head, mark, body = self._kept.partition(b"\n")
        if not mark:
            return None
        told = json.loads(head)
        if told.get("trouble"):
            raise DeviceProtocolError(str(told["trouble"]))
        size = int(told.get("bytes", 0))
        return (told, bytes(body[:size])) if len(body) >= size else None


class BlockReader:
    """Cuts a stream into blocks; lives as long as the port is open, so that a block may arrive in many pieces."""

    numbered = True
    unsolicited = True

    def __init__(self, *, jcamp: bool) -> None:
        self._end = re.compile(rb"^##END=[^\n]*\n" if jcamp else rb"\n\r?\n", re.MULTILINE | re.IGNORECASE)
        self._jcamp = jcamp
        self._kept = b""

    def feed(self, data: bytes) -> bytes | None:
        """The next whole block. A JCAMP-DX block begins with its title; what is before it was torn and is dropped."""
        self._kept = (self._kept + data)[-BLOCK_MAX:]
        if not self._jcamp:
            self._kept = self._kept.lstrip(b"\r\n")
        found = self._end.search(self._kept)
        if found is None:
            return None
        block, self._kept = self._kept[: found.end()], self._kept[found.end() :]
        if not self._jcamp:
            return block
        start = block.upper().rfind(b"##TITLE")
        return block[start:] if start >= 0 else block


def natural(name: str) -> tuple[object, ...]:
    """Sorts ``scan9`` before ``scan10``: runs of digits compare as numbers."""
    pieces = re.split(r"(\d+)", name.lower())
    return tuple((1, int(piece), "") if piece.isdigit() else (0, 0, piece) for piece in pieces if piece)


def _request(word: str, **more: object) -> bytes:
    return json.dumps({"ask": word, **more}).encode() + b"\n"


def _family(name: str, title: str, make: type[FolderSource] | type[StreamSource], options: type[O]) -> DriverFamily:
    return DriverFamily(name, CONTRACT, title, DIALECTS, CHANNELS, (), make, lambda dialect: schema_of(options))


FOLDER = _family("spectra-folder", "files of spectra that appear in a folder", FolderSource, FolderOptions)
STREAM = _family("spectra-stream", "spectra that an instrument sends unasked", StreamSource, StreamOptions)
