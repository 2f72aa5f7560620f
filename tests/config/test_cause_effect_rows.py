"""The default causes and effects, row by row, against the rules of a rig that has every sensor the table names.

Source: tests/reference/cause_effect.csv (own proposal, form after IEC 62881:2018). A row says which stop follows: all
pumps off and no flush is a cut, a flush that is waited for is a quench, effects without a pump are an alarm. Where the
rules of this program differ from a row, ``DIFFERENT`` says how and why.
"""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path

import pytest
from fakes.config_files import RECIPE, RIG, write

from rigd.config import load_pair
from rigd.logic.program import compile_program
from rigd.model.orders import Stop
from rigd.model.protection import Interlock
from rigd.model.rig import RigDefinition
from rigd.report.cause_effect import matrix
from rigd.report.gaps import USUAL, coverage, gaps

TEXT = (Path(__file__).parents[1] / "reference/cause_effect.csv").read_text(encoding="utf-8").splitlines()
ROWS = {row["id"]: row for row in csv.DictReader(TEXT[1:])}


def sensor(tag: str, measures: str, at: str, more: str) -> str:
    return f"""
[[sensors]]
tag = "{tag}"
title = "{tag}"
measures = "{measures}"
at = "{at}"
device = "sensors"
channel = "{tag.lower()}"
{more}
"""


def rule(name: str, trip_when: str, stop: str, delay: str, more: str = "") -> str:
    return f"""
[[interlocks]]
id = "{name}"
title = "{name}"
trip_when = [{trip_when}]
stop = "{stop}"
delay = "{delay}"
consequence = "see the row"
response = "see the row"
basis = "row of the table"
{more}
"""


FULL = (
    RIG
    + sensor("LD-1", "state", "COL", 'labels = ["dry", "wet"]')
    + sensor("LS-1", "state", "flask", 'labels = ["below", "high-high"]')
    + sensor("ES-1", "state", "COL", 'labels = ["released", "pressed"]')
    + sensor("TT-3", "temperature", "COL.inlet", 'span = ["-50 degC", "150 degC"]')
    + sensor("FT-1", "flow", "COL", 'span = ["0 mL/min", "10 mL/min"]')
    + rule(
        "DEAD-HEAD",
        '{ tag = "PT-1", rate_above = "30 bar/min", window = "2 s" },'
        ' { tag = "PT-2", rate_above = "30 bar/min", window = "2 s" }',
        "cut",
        "500 ms",
    )
    + rule("PRESSURE-LOST", '{ tag = "PT-1", below = "0.2 bar" }', "cut", "10 s", 'armed = "running"')
    + rule("LEAK", '{ tag = "LD-1", equals = "wet" }', "cut", "1 s")
    + rule("BED-HOTTER", '{ tag = "TT-1", above = "70 degC" }, { tag = "TT-3", above = "70 degC" }', "quench", "2 s")
    + rule("BED-RATE", '{ tag = "TT-1", rate_above = "2 K/min", window = "30 s" }', "quench", "5 s")
    + rule("BED-ABSOLUTE", '{ tag = "TT-1", above = "90 degC" }, { tag = "TT-3", above = "90 degC" }', "cut", "500 ms")
    + rule("PRESSURE-BAD", '{ tag = "PT-1", quality = "bad" }, { tag = "PT-2", quality = "bad" }', "cut", "1 s")
    + rule("BED-BAD", '{ tag = "TT-1", quality = "bad" }', "quench", "3 s")
    + rule("FLOW-LOST", '{ tag = "FT-1", below = "0.05 mL/min" }', "cut", "5 s", 'armed = "running"\nstartup = "60 s"')
    + rule("FLASK-FULL", '{ tag = "LS-1", equals = "high-high" }', "quench", "500 ms")
    + rule("FLASK-COUNTED", '{ tag = "flask.volume", above = "240 mL" }', "quench", "30 s")
    + rule("STOP-BUTTON", '{ tag = "ES-1", equals = "pressed" }', "cut", "0 s")
)

RULE_OF = {
    "C01": "PRESSURE-HIGH",
    "C02": "DEAD-HEAD",
    "C04": "PRESSURE-LOST",
    "C05": "LEAK",
    "C06": "BED-HOTTER",
    "C07": "BED-RATE",
    "C08": "BED-ABSOLUTE",
    "C09": "LINK-chiller",
    "C10": "PRESSURE-BAD",
    "C11": "BED-BAD",
    "C12": "FLOW-LOST",
    "C13": "STALL-PU-A",
    "C14": "MISMATCH-V-A",
    "C15": "FLASK-FULL",
    "C16": "FLASK-COUNTED",
    "C18": "STOP-BUTTON",
    "C19": "FAULT-SCAN",
    "C20": "FAULT-SUSPEND",
    "C21": "FAULT-JOURNAL",
    "C22": "FAULT-CONDUCT",
    "C24": "STOP-REQUEST",
    "C25": "POWER-pump-a",
}
ELSEWHERE = {
    "C03": "an alarm",
    "C17": "a hold by the sequence before the volume is short, and the checks before the run",
    "C23": "not built: an alarm may not move the rig (row 15 of the same notes); it is repeated instead",
    "C26": "a permissive: rigd.config.arming and rigd.logic.conduct.checks",
}
DIFFERENT = {
    # (row, what): (as in the row, as it is, why)
    ("C09", "vote"): ("1oo2", "1oo1", "the link and the jacket are two rules; each trips alone"),
    ("C10", "vote"): ("-", "1oo2", "a channel that cannot be believed is a vote; the other is a row of its own"),
    ("C14", "delay_s"): ("2", "1", "counted from when the valve must have arrived, its travel time apart"),
    ("C22", "stop"): ("QUENCH", "CUT", "an error inside the sequence leaves a program in an unknown state"),
    ("C22", "delay_s"): ("2", "0", "sequence and protection share a process: an error is known at once"),
}


@pytest.fixture(scope="module")
def rig(tmp_path_factory: pytest.TempPathFactory) -> RigDefinition:
    return load_pair(*write(tmp_path_factory.mktemp("rig"), FULL, RECIPE)).rig


@pytest.fixture(scope="module")
def rules(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Interlock]:
    pair = load_pair(*write(tmp_path_factory.mktemp("rig"), FULL, RECIPE))
    assert pair.recipe is not None
    return {lock.id: lock for lock in compile_program(pair.rig, pair.recipe).interlocks}


def stop_of(row: dict[str, str]) -> Stop:
    return Stop.QUENCH if row["FL"] == "W" else Stop.CUT if row["PA"] == row["PB"] == "X" else Stop.NONE


def expected(row_id: str, what: str, told: str) -> str:
    as_told, as_found, _ = DIFFERENT.get((row_id, what), (told, told, ""))
    assert as_told == told
    if (row_id, what) in DIFFERENT:
        assert as_found != told, "no difference any more"
    return as_found


def test_every_row_is_one_or_the_other() -> None:
    assert set(RULE_OF) | set(ELSEWHERE) == set(ROWS)
    assert not set(RULE_OF) & set(ELSEWHERE)
    assert {row for row, _ in DIFFERENT} <= set(RULE_OF)


@pytest.mark.parametrize("row_id", RULE_OF)
def test_row(row_id: str, rules: dict[str, Interlock]) -> None:
    row, lock = ROWS[row_id], rules[RULE_OF[row_id]]
    assert lock.stop.name == expected(row_id, "stop", stop_of(row).name)
    vote = lock.architecture if row["vote"] != "-" or len(lock.causes) > 1 else "-"
    assert vote == expected(row_id, "vote", row["vote"])
    assert f"{lock.on_delay_ns / 1e9:g}" == expected(row_id, "delay_s", row["delay_s"])
    assert row["reset"] == "M"  # every interlock latches until a person resets it


def test_what_is_no_stop_in_the_table_stops_nothing() -> None:
    assert [row_id for row_id in ELSEWHERE if stop_of(ROWS[row_id]) is Stop.NONE] == ["C03", "C26"]


def test_the_usual_causes_are_the_rows_of_the_table_in_their_order() -> None:
    assert [one.id for one in USUAL] == list(ROWS)


@pytest.mark.parametrize("row_id", RULE_OF)
def test_each_usual_cause_is_seen_by_its_rule_and_by_nobody_without_it(row_id: str, rig: RigDefinition) -> None:
    seen = {one.id: names for one, names in coverage(rig)}[row_id]
    assert RULE_OF[row_id] in seen
    poor = replace(
        rig,
        interlocks=tuple(lock for lock in rig.interlocks if lock.id not in seen),
        alarms=tuple(alarm for alarm in rig.alarms if alarm.id not in seen),
    )
    assert f"({row_id})" in " ".join(gap.what for gap in gaps(poor) if gap.code == "cause-unseen")


def test_a_rig_with_every_sensor_of_the_table_has_no_gaps(rig: RigDefinition) -> None:
    assert gaps(rig) == ()


@pytest.mark.parametrize("row_id", RULE_OF)
def test_the_matrix_moves_what_the_table_moves(row_id: str, rig: RigDefinition) -> None:
    """X or D of the table is a pump off; W a flush; FV and OV valves to rest; CK a bath kept; SQ the sequence."""
    told, name = ROWS[row_id], RULE_OF[row_id]
    kind = name.partition("-")[0]
    rows = {row.id: row for row in matrix(rig).rows}
    row = rows.get(name) or rows[f"{kind}-…"]
    pumps = {row.cells["PU-A"], row.cells["PU-B"]}
    stop = Stop[expected(row_id, "stop", stop_of(told).name)]
    delayed = expected(row_id, "delay_s", told["delay_s"]) != "0"
    assert pumps == ({"F"} if stop is Stop.QUENCH else {"D"} if delayed else {"X"})
    assert {row.cells[valve] for valve in ("V-A", "V-B", "V-C")} == {"R"}
    assert (row.cells["CH"], row.cells["sequence"][0] in "XD", row.cells["told"]) == ("S", True, "N1")


def test_alarms_move_nothing_in_the_matrix(rig: RigDefinition) -> None:
    rows = {row.id: row for row in matrix(rig).rows}
    assert rows["PRESSURE-RISING"].cells == {"told": "N2"}
    assert rows["EMPTY-PU-A"].cells == {"told": "N2", "sequence": "H"}
