"""How bad an unanswered fault was, told from the true plant."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from pathlib import Path
from typing import cast

import pytest

from rigd.config import load_pair
from rigd.logic import scan
from rigd.logic.program import Program, compile_program
from rigd.model.samples import Quality, Sample
from rigd.ports.plant import Plant
from rigd.prove.witness import DANGEROUS, HARMLESS, SPOILS, Witness

CONFIGS = Path(__file__).parents[2] / "configs"
TRUE = {
    "volume:floor": 0.0, "temperature:COL": 60.0, "temperature:COL.max": 61.0, "temperature:COL.jacket": 60.0,
    "pressure:TEE": 4.0, "pressure:IR": 2.0, "conversion:IR": 0.5, "flow:COL": 0.0,
}  # fmt: skip
READ = {"TT-1": 60.0, "TT-2": 60.0, "PT-1": 4.0, "PT-2": 2.0, "IR.conversion": 0.5}


class Known:
    """A plant whose truth is stated."""

    def __init__(self) -> None:
        self.now: dict[str, float] = dict(TRUE)

    def truth(self) -> Mapping[str, float]:
        return self.now


@pytest.fixture(scope="module")
def program() -> Program:
    pair = load_pair(CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml")
    assert pair.recipe is not None
    return compile_program(pair.rig, pair.recipe)


def state_with(program: Program, read: Mapping[str, float]) -> scan.CoreState:
    state = scan.initial(program, 0)
    samples = {tag: Sample(tag, value, 0, Quality.GOOD) for tag, value in read.items()}
    signals = dataclasses.replace(state.protect.signals, samples=samples)
    return dataclasses.replace(state, protect=dataclasses.replace(state.protect, signals=signals))


def judged(
    program: Program, true: Mapping[str, float], read: Mapping[str, float], seconds: int = 120
) -> tuple[str, str]:
    plant = Known()
    witness = Witness(program, cast(Plant, plant))
    witness.begin(0)
    plant.now |= true
    state = state_with(program, {**READ, **read})
    for second in range(seconds):
        witness.look(second * 1_000_000_000, state)
    return witness.findings("COL", 0.3)


@pytest.mark.parametrize(
    ("true", "read", "severity", "words"),
    [
        ({}, {}, HARMLESS, ""),
        ({"volume:floor": 3.0}, {}, DANGEROUS, "3 mL ran out"),
        ({"temperature:COL.max": 77.5}, {}, DANGEROUS, "2.5 K over the limit"),
        ({"temperature:COL": 70.0}, {}, DANGEROUS, "TT-1 reads 10.0 too low, and BED-HOT trusts it alone"),
        ({}, {"TT-1": 65.0}, SPOILS, "TT-1 is untrue by +5"),
        ({}, {"PT-1": 3.0}, SPOILS, "PT-1 is untrue by -1"),  # its partner votes with it
        ({"conversion:IR": 0.4}, {}, SPOILS, "IR.conversion is untrue by +0.1"),
        ({}, {"TT-1": 61.0, "PT-1": 4.1}, HARMLESS, ""),
    ],
)
def test_severity(
    program: Program, true: Mapping[str, float], read: Mapping[str, float], severity: str, words: str
) -> None:
    found, harm = judged(program, true, read)
    assert found == severity
    assert words in harm


def test_what_lasts_less_than_a_minute_is_no_untrue_reading(program: Program) -> None:
    assert judged(program, {}, {"PT-1": 3.0}, seconds=50) == (HARMLESS, "")


def test_a_part_near_its_rating_is_dangerous(program: Program) -> None:
    witness = Witness(program, cast(Plant, Known()))
    assert witness.findings("PU-A", 0.85) == (DANGEROUS, "PU-A came to 85 % of its rating")
    assert witness.findings("PU-A", 0.75) == (HARMLESS, "")


def test_liquid_that_lay_there_before_the_fault_is_not_counted(program: Program) -> None:
    plant = Known()
    plant.now["volume:floor"] = 3.0
    witness = Witness(program, cast(Plant, plant))
    witness.begin(0)
    witness.look(5_000_000_000, state_with(program, READ))
    assert witness.findings("COL", 0.3) == (HARMLESS, "")
