"""Files that appear half-written, late, twice, out of order, with wrong clocks; and spectra in a stream."""

from __future__ import annotations

import asyncio
import os
from pathlib import Path

import pytest

from rigd.adapters.folder_link import FolderLink, FolderWatch
from rigd.adapters.memory_link import memory_pair
from rigd.adapters.open_link import open_link
from rigd.app import make_drivers
from rigd.config.load import load_rig
from rigd.conformance.bench import run
from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import ConfigError, DeviceProtocolError, LinkClosed, LinkError
from rigd.runtime.core_inbox import CoreInbox
from rigd.runtime.device import Device
from rigd.runtime.line import LinkLine
from rigd.runtime.polls import polls_of
from rigd.runtime.spectra import cell_readers
from rigd.runtime.virtual_time import LoopClock
from rigd_drivers.spectra import FOLDER, STREAM
from rigd_drivers.spectra.driver import FolderSource, StreamSource, natural

ROOT = Path(__file__).resolve().parents[2]
CSV = {"format": "csv"}


def rows(level: float) -> str:
    return f"900,{level}\n902,{level}\n904,{level}\n"


def spec(driver: str, **options: object) -> DeviceSpec:
    return DeviceSpec("ir", driver, "", "files", "", "IR", (), options=options)


class Clock:
    now_s = 0.0

    def __call__(self) -> float:
        return self.now_s


class Desk:
    """A folder, the link that watches it with a clock of ours, and the driver."""

    def __init__(self, folder: Path, **options: object) -> None:
        self.folder, self.clock = folder, Clock()
        self.driver = FOLDER.make(spec("spectra-folder", files="*.csv", **{**CSV, **options}))
        assert isinstance(self.driver, FolderSource)
        self.source = self.driver
        self.line = LinkLine(FolderLink(FolderWatch(folder, self.clock)), name="files", timeout_s=5.0)

    async def open(self) -> Desk:
        await self.source.identify(self.line)
        await self.source.prepare(self.line)
        return self

    def write(self, name: str, text: str, mtime_s: float | None = None) -> None:
        (self.folder / name).write_text(text)
        if mtime_s is not None:
            os.utime(self.folder / name, (mtime_s, mtime_s))

    async def level(self, later_s: float = 5.0) -> float | None:
        """What the newest spectrum shows after some time; two looks, because the first one sees that a file is new."""
        await self.source.spectrum(self.line)
        self.clock.now_s += later_s
        told = await self.source.spectrum(self.line)
        return told.absorbance[0] if told.absorbance else None

    async def counts(self) -> list[float]:
        return [one.value for one in await self.source.poll(self.line, ["count", "passed_over"])]


def test_what_was_there_before_is_not_read_and_new_files_are(tmp_path: Path) -> None:
    async def work() -> None:
        (tmp_path / "scan0.csv").write_text(rows(9))
        desk = await Desk(tmp_path).open()
        assert await desk.level() is None
        desk.write("scan1.csv", rows(1))
        assert await desk.level() == 1
        assert await desk.counts() == [1, 0]
        who = await desk.source.identify(desk.line)
        assert who.serial_no == str(tmp_path)
        assert not who.simulated

    run(work())


def test_a_half_written_file_waits_until_it_is_whole(tmp_path: Path) -> None:
    async def work() -> None:
        desk = await Desk(tmp_path).open()
        for cut in (4, 12, 20):
            desk.write("scan1.csv", rows(1)[:cut])
            assert await desk.level(later_s=0.5) is None
        desk.write("scan1.csv", rows(1))
        assert await desk.level() == 1
        desk.write("scan2.csv.part", rows(2))
        desk.write(".scan3.csv", rows(3))
        desk.write("notes.txt", "hello")
        (tmp_path / "folder.csv").mkdir()
        assert await desk.level() == 1
        assert await desk.counts() == [1, 0]

    run(work())


def test_a_writer_that_pauses_longer_than_the_quiet_time_is_said_and_the_rest_is_taken(tmp_path: Path) -> None:
    async def work() -> None:
        desk = await Desk(tmp_path).open()
        desk.write("scan1.csv", rows(1)[:-3])
        with pytest.raises(DeviceProtocolError, match=r"scan1.csv.*not whole"):
            await desk.level()
        desk.write("scan1.csv", rows(1))
        assert await desk.level() == 1

    run(work())


def test_late_doubled_and_foreign_files_do_not_become_the_newest(tmp_path: Path) -> None:
    async def work() -> None:
        desk = await Desk(tmp_path).open()
        desk.write("scan10.csv", rows(10))
        assert await desk.level() == 10
        desk.write("scan9.csv", rows(9))  # late
        desk.write("scan11.csv", rows(10))  # the same spectrum again
        assert await desk.level() == 10
        assert await desk.counts() == [1, 2]
        desk.write("scan12.csv", "this is no spectrum\n")
        with pytest.raises(DeviceProtocolError, match="scan12"):
            await desk.level()
        assert await desk.level() == 10  # said once
        desk.write("scan13.csv", rows(13))
        desk.write("scan14.csv", rows(14))
        assert await desk.level() == 14
        assert await desk.counts() == [3, 3]

    run(work())


def test_order_by_arrival_believes_no_names(tmp_path: Path) -> None:
    async def work() -> None:
        desk = await Desk(tmp_path, order="arrival").open()
        desk.write("z.csv", rows(1))
        assert await desk.level() == 1
        desk.write("a.csv", rows(2))
        assert await desk.level() == 2

    run(work())


@pytest.mark.parametrize("mtime_s", [0.0, 4e9])
def test_the_clock_of_the_writer_is_not_believed(tmp_path: Path, mtime_s: float) -> None:
    async def work() -> None:
        desk = await Desk(tmp_path).open()
        desk.write("scan1.csv", rows(1), 2e9)
        assert await desk.level() == 1
        desk.write("scan2.csv", rows(2), mtime_s)  # decades before or after the first
        assert await desk.level() == 2

    run(work())


def test_a_folder_that_goes_away_is_said_and_comes_back(tmp_path: Path) -> None:
    async def work() -> None:
        folder = tmp_path / "ir"
        folder.mkdir()
        desk = await Desk(folder).open()
        folder.rmdir()
        with pytest.raises(DeviceProtocolError, match="cannot be read"):
            await desk.source.spectrum(desk.line)
        folder.mkdir()
        desk.write("scan1.csv", rows(1))
        assert await desk.level() == 1

    run(work())


async def test_the_port_of_a_folder(tmp_path: Path) -> None:
    link = await open_link(LinkSpec("files", f"folder://{tmp_path}"))
    await link.write(b'{"ask": "who"}\n')
    assert str(tmp_path).encode() in await link.read()
    await link.close()
    with pytest.raises(LinkClosed):
        await link.read()
    with pytest.raises(LinkClosed, match="No such file"):
        await open_link(LinkSpec("files", f"folder://{tmp_path}/nowhere"))
    with pytest.raises(LinkError, match="absolute path"):
        await open_link(LinkSpec("files", "folder://host/ir"))


def test_a_rig_reads_its_cell_from_a_folder_and_has_no_value_while_no_file_comes(tmp_path: Path) -> None:
    """The samples stop when the files do; the tags are then too old after five periods of the cell, as with a link."""
    text = (ROOT / "configs/rigs/two-pump-column.toml").read_text().replace("../chemistry", f"{ROOT}/configs/chemistry")
    ours = 'driver = "ir-cell"\ndialect = "bracket"\nlink = "ir-port"\naddress = "41"'
    port = 'id = "ir-port"\nport = "simulated"'
    assert ours in text
    assert port in text
    files = tmp_path / "files"
    files.mkdir()
    text = text.replace(port, f'id = "ir-port"\nport = "folder://{files}"')
    text = text.replace(
        ours, 'driver = "spectra-folder"\nlink = "ir-port"\noptions = { format = "csv", quiet = "0.1 s" }'
    )
    (tmp_path / "rig.toml").write_text(text)
    rig = load_rig(tmp_path / "rig.toml")
    (spec,) = (one for one in rig.devices if one.id == "ir")
    columns = "".join(f"{860 + 4 * i},{0.001 * i}\n" for i in range(236))

    async def work() -> None:
        clock, inbox = Clock(), CoreInbox(frozenset())
        device = Device(spec, make_drivers(rig)["ir"], polls_of(rig, spec), inbox, LoopClock(), cell_readers(rig)["ir"])
        line = LinkLine(FolderLink(FolderWatch(files, clock)), name="files", timeout_s=5.0)
        await device.bring_up(line, 0)
        seen = []
        for look in range(5):
            if look == 1:
                (files / "scan1.csv").write_text(columns)
            await device.poll(line, len(device.polls) - 1)
            seen.append(sorted(sample.tag for sample in inbox.take(()).samples))
            clock.now_s += 2.5
        assert [bool(tags) for tags in seen] == [False, False, True, False, False]
        assert "IR.conversion" in seen[2]

    run(work())


def test_natural_order() -> None:
    assert sorted(["s10", "s9", "S1b", "s1a"], key=natural) == ["s1a", "S1b", "s9", "s10"]


def test_options_that_cannot_be_are_refused() -> None:
    for options in ({"window": [1800.0, 900.0]}, {"format": "xml"}, {"quiet": "1 h"}, {"fils": "*.dx"}):
        with pytest.raises(ConfigError):
            FOLDER.make(spec("spectra-folder", **options))
    with pytest.raises(ConfigError):
        STREAM.make(spec("spectra-stream", files="*.dx"))


BLOCK = """##TITLE= {n}
##XUNITS= 1/CM
##YUNITS= ABSORBANCE
##FIRSTX= 900
##LASTX= 904
##NPOINTS= 3
##XYDATA= (X++(Y..Y))
900 {n} {n} {n}
##END=
"""


@pytest.mark.parametrize("piece", [1, 7, 10_000])
def test_blocks_of_a_stream_arrive_in_any_pieces_and_between_the_looks(piece: int) -> None:
    async def work() -> None:
        near, far = memory_pair()
        source = STREAM.make(spec("spectra-stream"))
        assert isinstance(source, StreamSource)
        line = LinkLine(near, name="stream", timeout_s=0.3)
        await source.identify(line)
        sent = (BLOCK.format(n=5)[40:] + BLOCK.format(n=6) + BLOCK.format(n=7)).encode()
        for start in range(0, len(sent), piece):
            await far.write(sent[start : start + piece])
        with pytest.raises(DeviceProtocolError, match="a block was passed over"):
            await source.spectrum(line)  # the torn head of what was sent before the port was opened
        assert (await source.spectrum(line)).absorbance == (7.0, 7.0, 7.0)
        await far.write(BLOCK.format(n=8)[:60].encode())
        assert (await source.spectrum(line)).absorbance == (7.0, 7.0, 7.0)  # half a block is none
        await far.write(BLOCK.format(n=8)[60:].encode())
        assert (await source.spectrum(line)).absorbance == (8.0, 8.0, 8.0)
        counts = await source.poll(line, ["count", "passed_over"])
        assert [one.value for one in counts] == [3, 1]

    run(work())


def test_columns_in_a_stream_end_with_an_empty_line() -> None:
    async def work() -> None:
        near, far = memory_pair()
        source = STREAM.make(spec("spectra-stream", format="csv", rows=3))
        assert isinstance(source, StreamSource)
        line = LinkLine(near, name="stream", timeout_s=0.3)
        await far.write((rows(1) + "\n" + rows(2) + "\n").encode())
        assert (await source.spectrum(line)).absorbance == (2.0, 2.0, 2.0)
        await asyncio.sleep(0)

    run(work())
