"""Parts and devices of a rig file: one thing is wrong, and exactly that is said, at its key and line.

A row fails when its check is removed (nothing is said) and when another check speaks out of turn (more is said).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import RIG, Row, block, within

ROWS = (
    Row(
        "duplicate-id",
        "valves[V-C].positions[3]",
        "positions",
        within("V-C", '["waste", "collect", "shut"]', '["waste", "collect", "waste"]'),
    ),
    Row(
        "flow-out-of-range",
        "flush_flow",
        "flush_flow",
        (('flush_flow = "2 mL/min"', 'flush_flow = "11 mL/min"'),),
        "",
        ("flow-out-of-range",),
    ),
    Row(
        "dead-head-unseen",
        "pumps[PU-A].force_limit",
        'force_limit = "200 N"',
        within("PU-A", 'force_limit = "130 N"', 'force_limit = "200 N"'),
        warning=True,
    ),
    Row(
        "liquid-missing",
        "vessels[bottle-A].liquid",
        "[[vessels]]",
        within("bottle-A", 'liquid = "acid-feed"\n', ""),
        "",
        ("liquid-unused",),
    ),
    Row(
        "liquid-unknown",
        "vessels[bottle-A].liquid",
        'liquid = "acid"',
        within("bottle-A", '"acid-feed"', '"acid"'),
        "",
        ("liquid-unused",),
    ),
    Row(
        "content-above-capacity",
        "vessels[bottle-S].content",
        'content = "1100 mL"',
        within("bottle-S", '"900 mL"', '"1100 mL"'),
    ),
    Row(
        "liquid-unused",
        "liquids[spare].id",
        'id = "spare"',
        (),
        block(RIG, "solvent").replace('"solvent"\nname', '"spare"\nname'),
        (),
        True,
    ),
    Row(
        "species-unknown",
        "liquids[alcohol-feed].composition.ethanl",
        "ethanl",
        within("alcohol-feed", "{ ethanol", "{ ethanl"),
    ),
    Row(
        "range-empty",
        "pumps[PU-A].rate_max",
        'rate_max = "0.005',
        within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "0.005 mL/min"'),
    ),
    Row(
        "range-empty",
        "pumps[PU-A].dead_volume",
        'dead_volume = "5 mL"',
        within("PU-A", 'dead_volume = "0.02 mL"', 'dead_volume = "5 mL"'),
    ),
    Row(
        "range-empty",
        "chillers[CH].range",
        'range = ["95',
        within("CH", '["-10 degC", "95 degC"]', '["95 degC", "-10 degC"]'),
    ),
    Row(
        "temperature-out-of-range",
        "chillers[CH].safe_temperature",
        "safe_temperature",
        within("CH", 'safe_temperature = "20 degC"', 'safe_temperature = "-20 degC"'),
    ),
    Row(
        "jacket-unknown",
        "columns[COL].jacket",
        'jacket = "CX"',
        within("COL", 'jacket = "CH"', 'jacket = "CX"'),
        "",
        ("chiller-unused",),
    ),
    Row("chiller-unused", "chillers[CH].id", 'id = "CH"', within("COL", 'jacket = "CH"\n', ""), "", (), True),
    Row(
        "beads-too-large",
        "columns[COL].packing.bead_diameter",
        "bead_diameter",
        within("COL", 'bead_diameter = "200 um"', 'bead_diameter = "200 mm"'),
    ),
    Row("part-unknown", "sensors[TT-1].at", 'at = "COLUMN.middle"', within("TT-1", "COL.middle", "COLUMN.middle")),
    Row("place-unknown", "sensors[TT-1].at", 'at = "COL.centre"', within("TT-1", "COL.middle", "COL.centre")),
    Row("part-unknown", "simulation.truth.COLUMN.voidage", "truth = ", (('"COL.voidage"', '"COLUMN.voidage"'),)),
    Row("truth-unknown", "simulation.truth.COL.voidness", "truth = ", (('"COL.voidage"', '"COL.voidness"'),)),
    Row(
        "device-unknown",
        "pumps[PU-A].device",
        'device = "pump-x"',
        within("PU-A", 'device = "pump-a"', 'device = "pump-x"'),
        "",
        ("device-unused",),
    ),
    Row(
        "device-unknown",
        "sensors[PT-1].device",
        'device = "sensor"',
        within("PT-1", 'device = "sensors"', 'device = "sensor"'),
    ),
    Row(
        "device-shared",
        "pumps[PU-B].device",
        'device = "pump-a"',
        within("PU-B", 'device = "pump-b"', 'device = "pump-a"'),
        "",
        ("device-unused",),
    ),
    Row(
        "device-unused",
        "devices[spare].id",
        'id = "spare"',
        (),
        '[[devices]]\nid = "spare"\ndriver = "sensor-module"\nlink = "bus-2"\naddress = "39"\n\n',
    ),
    Row(
        "link-unknown",
        "devices[ir].link",
        'link = "ir-prt"',
        within("ir", '"ir-port"\naddress', '"ir-prt"\naddress'),
        "",
        ("link-unused",),
    ),
    Row(
        "address-taken",
        "devices[pump-b].address",
        'address = "11"',
        within("pump-b", 'address = "12"', 'address = "11"'),
    ),
    Row(
        "address-taken",
        "devices[ir].link",
        'link = "chiller-port"',
        within("ir", 'link = "ir-port"\naddress = "41"', 'link = "chiller-port"'),
        "",
        ("link-unused",),
    ),
    Row(
        "port-taken",
        "links[bus-2].port",
        'port = "/dev/ttyUSB0"',
        (*within("bus-1", '"simulated"', '"/dev/ttyUSB0"'), *within("bus-2", '"simulated"', '"/dev/ttyUSB0"')),
    ),
    Row(
        "link-unused",
        "links[spare].id",
        'id = "spare"',
        (),
        '[[links]]\nid = "spare"\nport = "simulated"\n\n',
        (),
        True,
    ),
    Row("duplicate-id", "sensors[PT-2].channel", 'channel = "p1"', within("PT-2", 'channel = "p2"', 'channel = "p1"')),
    Row(
        "channel-wrong", "sensors[PT-2].channel", 'channel = "p 2"', within("PT-2", 'channel = "p2"', 'channel = "p 2"')
    ),
    Row(
        "channel-taken",
        "sensors[TT-2].channel",
        'channel = "bath"',
        within("TT-2", 'device = "sensors"\nchannel = "t2"', 'device = "chiller"\nchannel = "bath"'),
    ),
    Row(
        "stale-too-short",
        "sensors[PT-1].stale_after",
        'stale_after = "300 ms"',
        within("PT-1", 'stale_after = "1 s"', 'stale_after = "300 ms"'),
    ),
    Row(
        "stale-too-short",
        "devices[chiller].stale_after",
        'stale_after = "3 s"',
        within("chiller", 'period = "2 s"', 'period = "2 s"\nstale_after = "3 s"'),
    ),
)


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row.code}-{row.key}")
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    row.check(tmp_path)
