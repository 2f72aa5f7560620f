"""The tables that tests hold row by row are whole: as many rows as their source has, each with its source named, each
read by a test."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

TESTS = Path(__file__).parents[1]
ROWS = {
    "voting": 12, "interlock": 29, "alarm_core": 33, "alarm_overlay": 18, "alarm_resync": 6, "cause_effect": 26,
    "ne43": 7, "pt100": 12, "thermocouple": 15, "modbus_crc": 9, "procedure": 30,
}  # fmt: skip


@pytest.mark.parametrize(("name", "number"), ROWS.items())
def test_a_table_is_whole_and_says_where_it_comes_from(name: str, number: int) -> None:
    lines = (TESTS / "reference" / f"{name}.csv").read_text(encoding="utf-8").splitlines()
    told = [line for line in lines if line.startswith("#")]
    rows = list(csv.reader(line for line in lines if line and not line.startswith("#")))
    assert told
    assert len(rows) - 1 == number
    assert len({tuple(row) for row in rows}) == len(rows)
    assert {len(row) for row in rows} == {len(rows[0])}


@pytest.mark.parametrize("name", ROWS)
def test_a_test_reads_the_table(name: str) -> None:
    here = Path(__file__)
    readers = [
        path.name
        for path in TESTS.rglob("test_*.py")
        if path != here and any(word in path.read_text(encoding="utf-8") for word in (f'"{name}"', f"{name}.csv"))
    ]
    assert readers
