"""Which links the simulator serves: those that ask for it; a port of its own (files, hardware) stays out."""

from __future__ import annotations

from pathlib import Path

from fakes.config_files import RIG, edited, write

from rigd.config import load_rig
from rigd_sim.bench.server import _served


def test_a_cell_that_reads_a_folder_is_left_out(tmp_path: Path) -> None:
    text = edited(
        RIG,
        ('id = "ir-port"\nport = "simulated"\nbaud = "115200 baud"', f'id = "ir-port"\nport = "folder://{tmp_path}"'),
        ('driver = "ir-cell"\ndialect = "bracket"\nlink = "ir-port"\naddress = "41"',
         'driver = "spectra-folder"\nlink = "ir-port"'),
    )  # fmt: skip
    rig = load_rig(write(tmp_path, text)[0])
    served = _served(rig)
    assert {link.id for link in rig.links} - {link.id for link in served.links} == {"ir-port"}
    assert {spec.id for spec in rig.devices} - {spec.id for spec in served.devices} == {"ir"}


def test_all_links_of_a_real_rig_are_rehearsed(tmp_path: Path) -> None:
    text = RIG
    for number in range(RIG.count('port = "simulated"')):
        text = text.replace('port = "simulated"', f'port = "/dev/none{number}"', 1)
    rig = load_rig(write(tmp_path, text)[0])
    assert _served(rig) == rig
    whole = load_rig(write(tmp_path)[0])
    assert _served(whole) == whole
