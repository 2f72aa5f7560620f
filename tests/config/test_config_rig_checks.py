"""Every check of a rig file: one thing is wrong, and exactly that is said, at its key and line.

A row fails when its check is removed (nothing is said) and when another check speaks out of turn (more is said).
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pytest
from fakes.config_files import RIG, Edit, block, edited, rig_problems_of, write

from rigd.config import load_rig, read_rig
from rigd.model.problems import Severity

LEAK_SENSOR = """[[sensors]]
tag = "LD-1"
title = "leak tray"
measures = "state"
at = "COL"
labels = ["dry", "wet"]
device = "sensors"
channel = "d1"

"""
LINE = """[[lines]]
id = "L-X"
from = "{start}"
to = "{end}"
bore = "1 mm"
length = "100 mm"
rating = "20 bar"

"""


@dataclass(frozen=True)
class Row:
    """A finding and what provokes it: edits of the example rig, or blocks added before ``[simulation]``."""

    code: str
    key: str
    on_line: str
    edits: tuple[Edit, ...] = ()
    add: str = ""
    also: tuple[str, ...] = ()
    warning: bool = False

    def rig(self) -> str:
        return edited(RIG, *self.edits, ("[simulation]", f"{self.add}[simulation]"))


def without(*names: str) -> tuple[Edit, ...]:
    """Edits that remove whole tables."""
    return tuple((block(RIG, name), "") for name in names)


def within(name: str, old: str, new: str) -> tuple[Edit, ...]:
    """An edit inside one table only."""
    whole = block(RIG, name)
    return ((whole, edited(whole, (old, new))),)


ROWS = (
    # identity
    Row("duplicate-id", "lines[L-1].id", 'id = "L-1"', within("L-2", 'id = "L-2"', 'id = "L-1"')),
    Row("duplicate-id", "liquids[solvent].id", 'id = "solvent"', (), block(RIG, "solvent")),
    Row("duplicate-tag", "sensors[PT-1].tag", 'tag = "PT-1"', within("PT-2", 'tag = "PT-2"', 'tag = "PT-1"'), "", ("tag-unknown",)),
    Row(
        "duplicate-id", "alarms[BED-HOT].id", 'id = "BED-HOT"',
        within("FLASK-NEARLY-FULL", 'id = "FLASK-NEARLY-FULL"', 'id = "BED-HOT"'),
    ),
    Row(
        "duplicate-id", "interlocks[STALL-PU-A].id", 'id = "STALL-PU-A"',
        within("BED-HOT", 'id = "BED-HOT"', 'id = "STALL-PU-A"'),
    ),
    Row(
        "duplicate-id", "alarms[EMPTY-PU-A].id", 'id = "EMPTY-PU-A"',
        within("FLASK-NEARLY-FULL", 'id = "FLASK-NEARLY-FULL"', 'id = "EMPTY-PU-A"'),
    ),
    Row("duplicate-id", "links[bus-1].id", 'id = "bus-1"', (), '[[links]]\nid = "bus-1"\nport = "simulated"\n\n'),
    # lines
    Row("line-end-unknown", "lines[L-4].to", 'to = "V-D"', within("L-4", 'to = "V-C"', 'to = "V-D"'), "", ("part-without-line",)),
    Row("line-end-unknown", "lines[L-4].to", 'to = "CH"', within("L-4", 'to = "V-C"', 'to = "CH"'), "", ("part-without-line",)),
    Row("valve-position-unknown", "lines[L-5].from", 'from = "V-C.colect"', within("L-5", "V-C.collect", "V-C.colect")),
    Row("port-not-allowed", "lines[L-2].from", 'from = "COL.outlet"', within("L-2", 'from = "COL"', 'from = "COL.outlet"')),
    Row("line-to-itself", "lines[L-X].to", 'to = "BPR"', (), LINE.format(start="BPR", end="BPR"), ("lines-too-many", "lines-too-many")),
    Row("line-direction", "lines[L-X].to", 'to = "bottle-A"', (), LINE.format(start="flask", end="bottle-A"), ("line-direction",)),
    Row("part-without-inlet", "columns[COL].id", 'id = "COL"', without("L-1"), "", ("part-without-outlet",)),
    Row("part-without-inlet", "tees[TEE-X].id", 'id = "TEE-X"', (), '[[tees]]\nid = "TEE-X"\nvolume = "4 uL"\nrating = "70 bar"\n\n' + LINE.format(start="TEE-X", end="TEE"), ()),
    Row("part-without-outlet", "regulators[BPR].id", 'id = "BPR"', without("L-4"), "", ("part-without-line",)),
    Row("part-without-line", "vessels[spare].id", 'id = "spare"', (), '[[vessels]]\nid = "spare"\nrole = "waste"\ncapacity = "1 L"\n\n'),
    Row("part-without-line", "valves[V-X].id", 'id = "V-X"', (), '[[valves]]\nid = "V-X"\npositions = ["a", "b"]\nrest = "a"\ntravel_time = "1 s"\nrating = "20 bar"\n\n', ("part-without-line",)),
    Row("lines-too-many", "columns[COL].id", 'id = "COL"', (), LINE.format(start="bottle-S", end="COL")),
    Row("lines-too-many", "tees[TEE].id", 'id = "TEE"', (), LINE.format(start="TEE", end="waste")),
    Row("lines-too-many", "valves[V-A].id", 'id = "V-A"', (), LINE.format(start="bottle-B", end="V-A.reagent")),
    Row("valve-direction", "valves[V-C].id", 'id = "V-C"', (), LINE.format(start="bottle-S", end="V-C.shut")),
    # flow
    Row("rest-unknown", "valves[V-A].rest", 'rest = "solvant"', within("V-A", 'rest = "solvent"', 'rest = "solvant"')),
    Row("rest-not-solvent", "valves[V-B].rest", 'rest = "reagent"', within("V-B", 'rest = "solvent"', 'rest = "reagent"')),
    Row("rest-not-waste", "valves[V-C].rest", 'rest = "shut"', within("V-C", 'rest = "waste"', 'rest = "shut"')),
    Row("rest-not-waste", "valves[V-C].rest", 'rest = "collect"', within("V-C", 'rest = "waste"', 'rest = "collect"')),
    Row("pump-without-source", "valves[V-B].positions", "positions = ", without("L-B1"), "", ("part-without-line",)),
    Row("pump-without-source", "pumps[PU-B].id", 'id = "PU-B"', without("L-B1", "L-S2"), "", ("part-without-line", "part-without-line")),
    Row("pump-without-source", "valves[V-B].positions", "positions = ", within("V-B", '["solvent", "reagent"]', '["solvent", "reagent", "air"]')),
    Row("no-way-to-waste", "pumps[PU-A].id", 'id = "PU-A"', within("waste", 'role = "waste"', 'role = "collect"'), "", ("no-way-to-waste", "rest-not-waste")),
    Row("no-way-to-collect", "pumps[PU-A].id", 'id = "PU-A"', within("flask", 'role = "collect"', 'role = "waste"'), "", ("no-way-to-collect",), True),
    Row(
        "pump-cannot-flush", "pumps[PU-B].id", 'id = "PU-B"',
        (*without("V-B", "L-S2", "L-B2", "valve-b"), *within("L-B1", 'to = "V-B.reagent"', 'to = "PU-B"')), "", (), True,
    ),
    # parts
    Row("liquid-missing", "vessels[bottle-A].liquid", "[[vessels]]", within("bottle-A", 'liquid = "acid-feed"\n', ""), "", ("liquid-unused",)),
    Row("liquid-unknown", "vessels[bottle-A].liquid", 'liquid = "acid"', within("bottle-A", '"acid-feed"', '"acid"'), "", ("liquid-unused",)),
    Row("content-above-capacity", "vessels[bottle-S].content", 'content = "1100 mL"', within("bottle-S", '"900 mL"', '"1100 mL"')),
    Row("liquid-unused", "liquids[spare].id", 'id = "spare"', (), block(RIG, "solvent").replace('"solvent"\nname', '"spare"\nname'), (), True),
    Row("species-unknown", "liquids[alcohol-feed].composition.ethanl", "ethanl", within("alcohol-feed", "{ ethanol", "{ ethanl")),
    Row("range-empty", "pumps[PU-A].rate_max", 'rate_max = "0.005', within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "0.005 mL/min"')),
    Row("range-empty", "pumps[PU-A].dead_volume", 'dead_volume = "5 mL"', within("PU-A", 'dead_volume = "0.02 mL"', 'dead_volume = "5 mL"')),
    Row("range-empty", "chillers[CH].range", 'range = ["95', within("CH", '["-10 degC", "95 degC"]', '["95 degC", "-10 degC"]')),
    Row("temperature-out-of-range", "chillers[CH].safe_temperature", "safe_temperature", within("CH", 'safe_temperature = "20 degC"', 'safe_temperature = "-20 degC"')),
    Row("jacket-unknown", "columns[COL].jacket", 'jacket = "CX"', within("COL", 'jacket = "CH"', 'jacket = "CX"'), "", ("chiller-unused",)),
    Row("chiller-unused", "chillers[CH].id", 'id = "CH"', within("COL", 'jacket = "CH"\n', ""), "", (), True),
    Row("beads-too-large", "columns[COL].packing.bead_diameter", "bead_diameter", within("COL", 'bead_diameter = "200 um"', 'bead_diameter = "200 mm"')),
    Row("part-unknown", "sensors[TT-1].at", 'at = "COLUMN.middle"', within("TT-1", "COL.middle", "COLUMN.middle")),
    Row("place-unknown", "sensors[TT-1].at", 'at = "COL.centre"', within("TT-1", "COL.middle", "COL.centre")),
    Row("part-unknown", "simulation.truth.COLUMN.voidage", "truth = ", (('"COL.voidage"', '"COLUMN.voidage"'),)),
    Row("truth-unknown", "simulation.truth.COL.voidness", "truth = ", (('"COL.voidage"', '"COL.voidness"'),)),
    # devices
    Row("device-unknown", "pumps[PU-A].device", 'device = "pump-x"', within("PU-A", 'device = "pump-a"', 'device = "pump-x"'), "", ("device-unused",)),
    Row("device-unknown", "sensors[PT-1].device", 'device = "sensor"', within("PT-1", 'device = "sensors"', 'device = "sensor"')),
    Row("device-shared", "pumps[PU-B].device", 'device = "pump-a"', within("PU-B", 'device = "pump-b"', 'device = "pump-a"'), "", ("device-unused",)),
    Row("device-unused", "devices[spare].id", 'id = "spare"', (), '[[devices]]\nid = "spare"\ndriver = "sensor-module"\nlink = "bus-2"\naddress = "39"\n\n'),
    Row("link-unknown", "devices[ir].link", 'link = "ir-prt"', within("ir", '"ir-port"\naddress', '"ir-prt"\naddress'), "", ("link-unused",)),
    Row("address-taken", "devices[pump-b].address", 'address = "11"', within("pump-b", 'address = "12"', 'address = "11"')),
    Row("address-taken", "devices[ir].link", 'link = "chiller-port"', within("ir", 'link = "ir-port"\naddress = "41"', 'link = "chiller-port"'), "", ("link-unused",)),
    Row("port-taken", "links[bus-2].port", 'port = "/dev/ttyUSB0"', (*within("bus-1", '"simulated"', '"/dev/ttyUSB0"'), *within("bus-2", '"simulated"', '"/dev/ttyUSB0"'))),
    Row("link-unused", "links[spare].id", 'id = "spare"', (), '[[links]]\nid = "spare"\nport = "simulated"\n\n', (), True),
    Row("duplicate-id", "sensors[PT-2].channel", 'channel = "p1"', within("PT-2", 'channel = "p2"', 'channel = "p1"')),
    Row("channel-wrong", "sensors[PT-2].channel", 'channel = "p 2"', within("PT-2", 'channel = "p2"', 'channel = "p 2"')),
    Row("channel-taken", "sensors[TT-2].channel", 'channel = "bath"', within("TT-2", 'device = "sensors"\nchannel = "t2"', 'device = "chiller"\nchannel = "bath"')),
    Row("stale-too-short", "sensors[PT-1].stale_after", 'stale_after = "300 ms"', within("PT-1", 'stale_after = "1 s"', 'stale_after = "300 ms"')),
    Row("stale-too-short", "devices[chiller].stale_after", 'stale_after = "3 s"', within("chiller", 'period = "2 s"', 'period = "2 s"\nstale_after = "3 s"')),
    # rules
    Row("tag-unknown", "interlocks[BED-HOT].trip_when[1].tag", "TT-9", within("BED-HOT", '"TT-1"', '"TT-9"')),
    Row("tag-unknown", "interlocks[JACKET-ADRIFT].trip_when[1].differs_from", "CH.set", within("JACKET-ADRIFT", "CH.setpoint", "CH.set")),
    Row("unit-wrong", "interlocks[BED-HOT].trip_when[1].above", '"75 bar"', within("BED-HOT", '"75 degC"', '"75 bar"')),
    Row("unit-wrong", "interlocks[JACKET-ADRIFT].trip_when[1].by", '"6 degC"', within("JACKET-ADRIFT", '"6 K"', '"6 degC"')),
    Row("unit-wrong", "interlocks[JACKET-ADRIFT].trip_when[1].differs_from", "PT-1", within("JACKET-ADRIFT", "CH.setpoint", "PT-1")),
    Row("unit-wrong", "alarms[PRESSURE-RISING].when.deadband", '"0.4 K"', within("PRESSURE-RISING", '"0.4 bar"', '"0.4 K"')),
    Row("value-out-of-range", "interlocks[JACKET-ADRIFT].trip_when[1].by", '"-6 K"', within("JACKET-ADRIFT", '"6 K"', '"-6 K"')),
    Row("comparison-wrong", "alarms[FLASK-NEARLY-FULL].when.above", "V-C.position", within("FLASK-NEARLY-FULL", '"flask.volume"', '"V-C.position"')),
    Row("comparison-wrong", "interlocks[BED-HOT].trip_when[1].equals", "equals", within("BED-HOT", 'above = "75 degC"', "equals = 1")),
    Row("comparison-wrong", "alarms[PRESSURE-RISING].when.rate_above", "PU-A.flow", within("PRESSURE-RISING", '"PT-1", above = "6.5 bar", deadband = "0.4 bar"', '"PU-A.flow", rate_above = "1 mL/min"')),
    Row("state-unknown", "interlocks[BED-HOT].trip_when[1].equals", '"moist"', within("BED-HOT", '"TT-1", above = "75 degC"', '"LD-1", equals = "moist"'), LEAK_SENSOR),
    Row("state-unknown", "interlocks[BED-HOT].trip_when[1].equals", "equals = 2", within("BED-HOT", '"TT-1", above = "75 degC"', '"LD-1", equals = 2'), LEAK_SENSOR),
    Row("window-short", "interlocks[BED-HOT].trip_when[1].window", "window", within("BED-HOT", 'above = "75 degC"', 'rate_above = "5 K/min", window = "3 s"')),
    Row("vote-impossible", "interlocks[PRESSURE-HIGH].vote", "3oo2", within("PRESSURE-HIGH", "1oo2", "3oo2")),
    Row("vote-impossible", "interlocks[PRESSURE-HIGH].vote", "2oo3", within("PRESSURE-HIGH", "1oo2", "2oo3")),
    Row("vote-all", "interlocks[PRESSURE-HIGH].vote", "2oo2", within("PRESSURE-HIGH", "1oo2", "2oo2")),
    Row("no-protection", "interlocks[BED-HOT].on_bad", "on_bad", within("BED-HOT", 'on_bad = "trip"', 'on_bad = "ignore"')),
    Row("settling-unused", "interlocks[BED-HOT].settling", "settling", within("BED-HOT", 'delay = "2 s"', 'delay = "2 s"\nsettling = "5 s"')),
    Row("limit-outside-span", "interlocks[BED-HOT].trip_when[1].above", "175 degC", within("BED-HOT", "75 degC", "175 degC")),
    Row("limit-outside-span", "interlocks[BED-HOT].trip_when[1].above", "-75 degC", within("BED-HOT", "75 degC", "-75 degC")),
    Row("limit-outside-span", "interlocks[BED-HOT].trip_when[1].below", "-75 degC", within("BED-HOT", 'above = "75 degC"', 'below = "-75 degC"')),
    Row("limit-outside-span", "alarms[PRESSURE-RISING].when.below", "30 bar", within("PRESSURE-RISING", 'above = "6.5 bar"', 'below = "30 bar"')),
    Row("limit-above-rating", "interlocks[PRESSURE-HIGH].trip_when[2].above", "20 bar", within("PRESSURE-HIGH", '"PT-2", above = "8 bar"', '"PT-2", above = "20 bar"')),
    Row("limit-above-rating", "alarms[PRESSURE-RISING].when.above", "21 bar", within("PRESSURE-RISING", "6.5 bar", "21 bar")),
    Row("limit-above-capacity", "alarms[FLASK-NEARLY-FULL].when.above", "250 mL", within("FLASK-NEARLY-FULL", "225 mL", "250 mL")),
    Row("psi-as-bar", "alarms[PRESSURE-RISING].when.above", "290 bar", within("PRESSURE-RISING", "6.5 bar", "290 bar"), "", ("limit-above-rating", "limit-outside-span")),
    Row("psi-as-bar", "alarms[PRESSURE-RISING].when.above", "1.37 bar", within("PRESSURE-RISING", "6.5 bar", "1.37 bar"), "", (), True),
    Row("pressure-not-cut", "interlocks[PRESSURE-HIGH].stop", "quench", within("PRESSURE-HIGH", 'stop = "cut"', 'stop = "quench"'), "", ("rating-unprotected",)),
    Row("limit-not-armed", "interlocks[PRESSURE-HIGH].armed", "armed", within("PRESSURE-HIGH", 'stop = "cut"', 'stop = "cut"\narmed = "running"')),
    Row("rating-unprotected", "pumps[PU-A].rating", 'rating = "20 bar"', without("PRESSURE-HIGH"), "", (), True),
)  # fmt: skip


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row.code}-{row.key}")
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    problems = rig_problems_of(tmp_path, row.rig())

    assert sorted(problem.code for problem in problems) == sorted((row.code, *row.also)), [str(p) for p in problems]
    found = [problem for problem in problems if problem.code == row.code and problem.key == row.key]
    assert found, [(problem.code, problem.key) for problem in problems]
    assert row.on_line in row.rig().splitlines()[found[0].line - 1]
    assert found[0].file == str(tmp_path / "rigs/rig.toml")
    assert found[0].message
    assert found[0].remedy
    assert (found[0].severity is Severity.WARNING) == (row.warning or row.code == "psi-as-bar")


def test_the_untouched_example_says_nothing(tmp_path: Path) -> None:
    assert not rig_problems_of(tmp_path, RIG)


def test_warnings_alone_let_the_rig_pass(tmp_path: Path) -> None:
    path, _ = write(tmp_path, edited(RIG, (block(RIG, "PRESSURE-HIGH"), "")))

    assert [problem.code for problem in read_rig(path).problems] == ["rating-unprotected"]
    assert load_rig(path).name == "two-pump-column"


def test_a_circle_of_lines_is_no_flow_path(tmp_path: Path) -> None:
    """All local rules are met, but the liquid would run round for ever."""
    rig = edited(
        RIG,
        *within("L-4", 'to = "V-C"', 'to = "TEE"'),
        *without("L-5", "L-6", "V-C", "flask", "waste", "valve-c", "FLASK-NEARLY-FULL"),
    )
    codes = {problem.code for problem in rig_problems_of(tmp_path, rig)}

    assert codes == {"no-way-to-waste", "no-way-to-collect"}


def test_two_separate_trains_are_no_flow_path(tmp_path: Path) -> None:
    """Each pump has its source and its waste, but they never meet."""
    rig = edited(RIG, *within("L-B3", 'to = "TEE"', 'to = "waste"'))
    problems = rig_problems_of(tmp_path, rig)

    assert [problem.code for problem in problems if problem.severity is Severity.ERROR] == ["flow-path"]
    assert "PU-B" in " ".join(problem.message for problem in problems)


def test_all_problems_are_told_at_once_and_in_order_of_lines(tmp_path: Path) -> None:
    """Structure and meaning together, and a broken table does not make others break."""
    rig = edited(
        RIG,
        *within("PU-A", 'rate_max = "5 mL/min"', 'rate_maximum = "5 mL/min"'),
        *within("TT-1", "COL.middle", "COL.centre"),
        *within("BED-HOT", '"TT-1"', '"TT-9"'),
        *within("FLASK-NEARLY-FULL", 'action = "Exchange the flask at the next hold."', ""),
        *within("L-5", 'bore = "0.5 mm"', 'bore = "0.5"'),
    )
    problems = rig_problems_of(tmp_path, rig)

    assert [(problem.code, problem.key) for problem in problems] == [
        ("key-missing", "pumps[PU-A].rate_max"),
        ("key-unknown", "pumps[PU-A].rate_maximum"),
        ("unit-missing", "lines[L-5].bore"),
        ("place-unknown", "sensors[TT-1].at"),
        ("tag-unknown", "interlocks[BED-HOT].trip_when[1].tag"),
        ("alarm-without-action", "alarms[FLASK-NEARLY-FULL].action"),
    ]
    lines = [problem.line for problem in problems]
    assert lines == sorted(lines)


def test_a_tag_of_a_broken_sensor_is_not_called_unknown(tmp_path: Path) -> None:
    rig = edited(RIG, *within("TT-1", 'lag = "3 s"', "lag = 3"))

    assert [problem.code for problem in rig_problems_of(tmp_path, rig)] == ["unit-missing"]


def test_names_near_the_wrong_one_are_offered(tmp_path: Path) -> None:
    rig = edited(RIG, *within("BED-HOT", '"TT-1"', '"tt1"'), *within("L-4", 'to = "V-C"', 'to = "VC"'))
    messages = {problem.code: problem.message for problem in rig_problems_of(tmp_path, rig)}

    assert "did you mean 'TT-1'?" in messages["tag-unknown"]
    assert "did you mean 'V-C'?" in messages["line-end-unknown"]
