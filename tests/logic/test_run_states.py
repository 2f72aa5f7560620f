"""Every row of the published table, and nothing beside it."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from rigd.logic.conduct.run_states import STATES, following, over

TABLE = Path(__file__).parents[1] / "reference" / "procedure.csv"


def rows() -> list[tuple[str, str, str]]:
    with TABLE.open(encoding="utf-8") as file:
        lines = [line for line in file if not line.startswith("#")]
    return [(row["from"], row["command_or_end"], row["to"]) for row in csv.DictReader(lines)]


@pytest.mark.parametrize(("start", "command", "end"), rows())
def test_row(start: str, command: str, end: str) -> None:
    assert following(start, command) == end


def test_nothing_but_the_table() -> None:
    table = {(start, command): end for start, command, end in rows()}
    commands = {command for _, command, _ in rows()}
    found = {(state, command): following(state, command) for state in STATES for command in commands}
    assert {key: end for key, end in found.items() if end is not None} == table


def test_states_of_the_table_are_all_known() -> None:
    assert {row[0] for row in rows()} | {row[2] for row in rows()} == set(STATES)


def test_unknown_command_leads_nowhere() -> None:
    assert following("RUNNING", "DANCE") is None


def test_leaving_held_never_goes_straight_to_running() -> None:
    assert {following("HELD", command) for _, command, _ in rows()} == {None, "RESTARTING", "STOPPING", "ABORTING"}


@pytest.mark.parametrize(("state", "expected"), [("COMPLETE", True), ("STOPPED", True), ("HELD", False)])
def test_over(state: str, expected: bool) -> None:
    assert over(state) is expected
