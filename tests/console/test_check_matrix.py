"""The matrix of ``rigd check`` as a person and as a program get it."""

from __future__ import annotations

import io
import json
from dataclasses import replace
from pathlib import Path

import pytest
from rich.console import Console

from rigd.config import load_rig
from rigd.console.checking import cause_effect_facts
from rigd.console.matrix_view import cause_and_effect
from rigd.model.rig import RigDefinition
from rigd.report.gaps import gaps

RIGS = Path(__file__).parents[2] / "configs" / "rigs"


@pytest.fixture(scope="module")
def rig() -> RigDefinition:
    return load_rig(RIGS / "two-pump-column.toml")


def shown(rig: RigDefinition) -> str:
    console = Console(width=160, file=io.StringIO())
    console.print(cause_and_effect(rig))
    return console.file.getvalue()  # type: ignore[attr-defined,no-any-return]


def test_a_person_sees_letters_their_legend_the_gaps_and_what_is_watched(rig: RigDefinition) -> None:
    text = shown(rig)
    (row,) = [line.split() for line in text.splitlines() if line.strip().startswith("PRESSURE-HIGH")]
    assert row[-9:] == ["s", "D", "D", "R", "R", "R", "S", "D", "N1"][-9:]
    assert "D the same, after the delay of its row" in text
    assert "Only told to a person: PRESSURE-RISING" in text
    assert "no rule sees liquid on the floor (C05)" in text
    assert "resistance from PT-1 to PT-2 (COL): 40 % more is seen from about" in text


def test_a_part_without_a_trip_has_a_heading_of_its_own(rig: RigDefinition) -> None:
    assert "a rated part without a trip" not in shown(rig)
    bare = replace(rig, interlocks=tuple(lock for lock in rig.interlocks if lock.id != "PRESSURE-HIGH"))
    assert "a rated part without a trip" in shown(bare)


def test_a_program_gets_all_of_it_as_json(rig: RigDefinition) -> None:
    facts = json.loads(json.dumps(cause_effect_facts(rig)))
    assert [gap["what"] for gap in facts["gaps"]] == [gap.what for gap in gaps(rig)]
    assert facts["rows"][0]["cells"]["PU-A"] == "D"
    assert set(facts["legend"]) == set("XDFRSHN")
    assert len(facts["watched_early"]) == 2
