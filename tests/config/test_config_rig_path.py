"""Names and the flow path of a rig file: one thing is wrong, and exactly that is said, at its key and line.

A row fails when its check is removed (nothing is said) and when another check speaks out of turn (more is said).
"""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import RIG, Row, block, within, without

LINE = """[[lines]]
id = "L-X"
from = "{start}"
to = "{end}"
bore = "1 mm"
length = "100 mm"
rating = "20 bar"

"""


ROWS = (
    Row("duplicate-id", "lines[L-1].id", 'id = "L-1"', within("L-2", 'id = "L-2"', 'id = "L-1"')),
    Row("duplicate-id", "liquids[solvent].id", 'id = "solvent"', (), block(RIG, "solvent")),
    Row(
        "duplicate-tag",
        "sensors[PT-1].tag",
        'tag = "PT-1"',
        within("PT-2", 'tag = "PT-2"', 'tag = "PT-1"'),
        "",
        ("tag-unknown",),
    ),
    Row(
        "duplicate-id",
        "alarms[BED-HOT].id",
        'id = "BED-HOT"',
        within("FLASK-NEARLY-FULL", 'id = "FLASK-NEARLY-FULL"', 'id = "BED-HOT"'),
    ),
    Row(
        "duplicate-id",
        "interlocks[STALL-PU-A].id",
        'id = "STALL-PU-A"',
        within("BED-HOT", 'id = "BED-HOT"', 'id = "STALL-PU-A"'),
    ),
    Row(
        "duplicate-id",
        "alarms[EMPTY-PU-A].id",
        'id = "EMPTY-PU-A"',
        within("FLASK-NEARLY-FULL", 'id = "FLASK-NEARLY-FULL"', 'id = "EMPTY-PU-A"'),
    ),
    Row("duplicate-id", "links[bus-1].id", 'id = "bus-1"', (), '[[links]]\nid = "bus-1"\nport = "simulated"\n\n'),
    Row(
        "line-end-unknown",
        "lines[L-4].to",
        'to = "V-D"',
        within("L-4", 'to = "V-C"', 'to = "V-D"'),
        "",
        ("part-without-line",),
    ),
    Row(
        "line-end-unknown",
        "lines[L-4].to",
        'to = "CH"',
        within("L-4", 'to = "V-C"', 'to = "CH"'),
        "",
        ("part-without-line",),
    ),
    Row("valve-position-unknown", "lines[L-5].from", 'from = "V-C.colect"', within("L-5", "V-C.collect", "V-C.colect")),
    Row(
        "port-not-allowed",
        "lines[L-2].from",
        'from = "COL.outlet"',
        within("L-2", 'from = "COL"', 'from = "COL.outlet"'),
    ),
    Row(
        "line-to-itself",
        "lines[L-X].to",
        'to = "BPR"',
        (),
        LINE.format(start="BPR", end="BPR"),
        ("lines-too-many", "lines-too-many"),
    ),
    Row(
        "line-direction",
        "lines[L-X].to",
        'to = "bottle-A"',
        (),
        LINE.format(start="flask", end="bottle-A"),
        ("line-direction",),
    ),
    Row("part-without-inlet", "columns[COL].id", 'id = "COL"', without("L-1"), "", ("part-without-outlet",)),
    Row(
        "part-without-inlet",
        "tees[TEE-X].id",
        'id = "TEE-X"',
        (),
        '[[tees]]\nid = "TEE-X"\nvolume = "4 uL"\nrating = "70 bar"\n\n' + LINE.format(start="TEE-X", end="TEE"),
        (),
    ),
    Row("part-without-outlet", "regulators[BPR].id", 'id = "BPR"', without("L-4"), "", ("part-without-line",)),
    Row(
        "part-without-line",
        "vessels[spare].id",
        'id = "spare"',
        (),
        '[[vessels]]\nid = "spare"\nrole = "waste"\ncapacity = "1 L"\n\n',
    ),
    Row(
        "part-without-line",
        "valves[V-X].id",
        'id = "V-X"',
        (),
        '[[valves]]\nid = "V-X"\npositions = ["a", "b"]\nrest = "a"\ntravel_time = "1 s"\nrating = "20 bar"\n\n',
        ("part-without-line",),
    ),
    Row("lines-too-many", "columns[COL].id", 'id = "COL"', (), LINE.format(start="bottle-S", end="COL")),
    Row("lines-too-many", "tees[TEE].id", 'id = "TEE"', (), LINE.format(start="TEE", end="waste")),
    Row("lines-too-many", "valves[V-A].id", 'id = "V-A"', (), LINE.format(start="bottle-B", end="V-A.reagent")),
    Row("valve-direction", "valves[V-C].id", 'id = "V-C"', (), LINE.format(start="bottle-S", end="V-C.shut")),
    Row("rest-unknown", "valves[V-A].rest", 'rest = "solvant"', within("V-A", 'rest = "solvent"', 'rest = "solvant"')),
    Row(
        "rest-not-solvent",
        "valves[V-B].rest",
        'rest = "reagent"',
        within("V-B", 'rest = "solvent"', 'rest = "reagent"'),
    ),
    Row("rest-not-waste", "valves[V-C].rest", 'rest = "shut"', within("V-C", 'rest = "waste"', 'rest = "shut"')),
    Row("rest-not-waste", "valves[V-C].rest", 'rest = "collect"', within("V-C", 'rest = "waste"', 'rest = "collect"')),
    Row("pump-without-source", "valves[V-B].positions", "positions = ", without("L-B1"), "", ("part-without-line",)),
    Row(
        "pump-without-source",
        "pumps[PU-B].id",
        'id = "PU-B"',
        without("L-B1", "L-S2"),
        "",
        ("part-without-line", "part-without-line"),
    ),
    Row(
        "pump-without-source",
        "valves[V-B].positions",
        "positions = ",
        within("V-B", '["solvent", "reagent"]', '["solvent", "reagent", "air"]'),
    ),
    Row(
        "no-way-to-waste",
        "pumps[PU-A].id",
        'id = "PU-A"',
        within("waste", 'role = "waste"', 'role = "collect"'),
        "",
        ("no-way-to-waste", "rest-not-waste"),
    ),
    Row(
        "no-way-to-collect",
        "pumps[PU-A].id",
        'id = "PU-A"',
        within("flask", 'role = "collect"', 'role = "waste"'),
        "",
        ("no-way-to-collect",),
        True,
    ),
    Row(
        "pump-cannot-flush",
        "pumps[PU-B].id",
        'id = "PU-B"',
        (*without("V-B", "L-S2", "L-B2", "valve-b"), *within("L-B1", 'to = "V-B.reagent"', 'to = "PU-B"')),
        "",
        (),
        True,
    ),
)


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row.code}-{row.key}")
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    row.check(tmp_path)
