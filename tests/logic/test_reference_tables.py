"""Voting, latch and alarm core against the reference tables, row by row; each CSV names its source."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from rigd.logic.protect import alarm_core, alarm_overlay, latch
from rigd.logic.protect.alarm_core import AlarmEvent, AlarmState
from rigd.logic.protect.alarm_overlay import Flag, FlagEvent
from rigd.logic.protect.latch import LatchEvent, LatchState
from rigd.logic.protect.voting import rule
from rigd.model.protection import OnBad

REFERENCE = Path(__file__).parents[1] / "reference"


def rows(name: str) -> list[dict[str, str]]:
    lines = (REFERENCE / f"{name}.csv").read_text().splitlines()
    assert lines[0].startswith("# Source: ")
    return list(csv.DictReader(lines[1:]))


@pytest.mark.parametrize("row", rows("voting"), ids=lambda row: f"{row['arch']}-{row['bad']}-bad")
@pytest.mark.parametrize("policy", ["T", "N"])
def test_voting(row: dict[str, str], policy: str) -> None:
    votes, channels = (int(part) for part in row["arch"].split("oo"))
    bad = int(row["bad"])
    found = rule(votes, channels, bad, OnBad.TRIP if policy == "T" else OnBad.IGNORE)
    assert found.equivalent == row[f"policy_{policy}_equiv"]
    condition = row[f"policy_{policy}_trip_if"]
    for demanding in range(channels - bad + 1):
        expected = {"always": True, "never": False}.get(condition)
        if expected is None:
            expected = demanding >= int(condition.removeprefix("t>="))
        assert found.demands(demanding) is expected


def guards_of(row: dict[str, str]) -> list[bool]:
    """The values of the guard for which a row holds: a named guard is true, "otherwise" or its opposite false."""
    if row["guard"] == "*":
        return [False, True]
    return [row["guard"] not in ("otherwise", "cause_absent")]


@pytest.mark.parametrize("row", rows("interlock"), ids=lambda row: f"{row['from']}-{row['event']}-{row['guard']}")
def test_latch(row: dict[str, str]) -> None:
    sources = list(LatchState) if row["from"] == "*" else [LatchState[row["from"]]]
    for source in sources:
        for guard in guards_of(row):
            found = latch.move(source, LatchEvent[row["event"]], guard)
            assert found.to is LatchState[row["to"]]
            assert found.to.permits is (row["permit"] == "1")
            assert bool(found.rejected) is row["record"].startswith("rejected")


def test_latch_table_has_no_row_that_the_reference_lacks() -> None:
    named = {(row["from"], row["event"]) for row in rows("interlock") if row["event"] != "PWR"}
    assert {(source.name, event.value) for source, event in latch.TABLE} == named


GUARDS = {
    "*": [(False, False), (False, True), (True, True)],
    "L=0&K=1": [(False, True)],
    "L=0&K=0": [(False, False)],
    "L=0": [(False, False), (False, True)],
    "L=1": [(True, True)],
}


@pytest.mark.parametrize("row", rows("alarm_core"), ids=lambda row: f"{row['from']}-{row['event']}-{row['guard']}")
def test_alarm_core(row: dict[str, str]) -> None:
    for latching, needs in GUARDS[row["guard"]]:
        found = alarm_core.move(
            AlarmState(row["from"]), AlarmEvent(row["event"]), latching=latching, needs_acknowledge=needs
        )
        assert (str(found.to), str(found.announce), found.result) == (row["to"], row["ann"], row["result"])


def test_alarm_core_reference_is_complete() -> None:
    covered = [(row["from"], row["event"], guard) for row in rows("alarm_core") for guard in GUARDS[row["guard"]]]
    assert len(covered) == len(set(covered)) == 6 * 5 * 3


FLAG_GUARDS = {"*": [False, True], "otherwise": [False]}
"""Every other guard is a condition that holds."""


@pytest.mark.parametrize("row", rows("alarm_overlay"), ids=lambda row: f"{row['flag']}-{row['event']}-{row['guard']}")
def test_alarm_overlay(row: dict[str, str]) -> None:
    for guard in FLAG_GUARDS.get(row["guard"], [True]):
        found = alarm_overlay.turn(Flag(row["flag"]), row["value"] == "1", FlagEvent(row["event"]), guard)
        assert (found.up, found.result) == (row["to"] == "1", row["result"])


def test_alarm_overlay_has_each_row_once_and_none_besides() -> None:
    covered = [
        (Flag(row["flag"]), row["value"] == "1", FlagEvent(row["event"]), guard)
        for row in rows("alarm_overlay")
        for guard in FLAG_GUARDS.get(row["guard"], [True])
    ]
    assert len(covered) == len(set(covered))
    assert {row[:3] for row in covered} == set(alarm_overlay.TABLE)


@pytest.mark.parametrize("row", rows("alarm_resync"), ids=lambda row: row["core"])
def test_alarm_resync(row: dict[str, str]) -> None:
    state, announce = alarm_overlay.RESYNC[AlarmState(row["core"])]
    assert (str(state), str(announce)) == (row["to"], row["ann"])


def test_alarm_resync_is_complete() -> None:
    assert [row["core"] for row in rows("alarm_resync")] == [str(state) for state in AlarmState]


@pytest.mark.parametrize("row", rows("alarm_core"), ids=lambda row: f"{row['from']}-{row['event']}-{row['guard']}")
def test_alarm_core_while_hidden(row: dict[str, str]) -> None:
    """Nothing is announced; B goes to A and not to D; ACK and RESET are rejected (text beside the overlay table)."""
    for latching, needs in GUARDS[row["guard"]]:
        found = alarm_overlay.hidden_move(
            AlarmState(row["from"]), AlarmEvent(row["event"]), latching=latching, needs_acknowledge=needs
        )
        assert str(found.announce) == "-"
        if row["event"] in ("ACK", "RESET"):
            assert (str(found.to), found.result) == (row["from"], "rejected")
        elif row["event"] == "REALARM":
            assert (str(found.to), found.result) == (row["from"], "ignored")
        else:
            assert (str(found.to), found.result) == (
                "A" if row["to"] == "D" != row["from"] else row["to"],
                row["result"],
            )


def test_every_entry_holds_the_two_values_of_its_guard_and_without_a_word_it_is_false() -> None:
    assert {len(entry) for entry in (*alarm_overlay.TABLE.values(), *latch.TABLE.values())} == {2}
    assert alarm_overlay.turn(Flag.SHELVED, False, FlagEvent.SHELVE).result == "rejected"
    assert latch.move(LatchState.TRIPPED_CLEAR, LatchEvent.RESET).to is LatchState.TRIPPED_CLEAR
    assert latch.move(LatchState.TRIPPED_CLEAR, LatchEvent.RESET).rejected
