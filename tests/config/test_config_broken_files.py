"""Ten broken files: helpful answers, each at its line and key. The same files are given to the command line."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import CONFIGS

from rigd.config import load_pair
from rigd.model.errors import ConfigError
from rigd.model.problems import Severity

BROKEN = Path(__file__).parent / "broken"
RIG = CONFIGS / "rigs/two-pump-column.toml"

EXPECTED = {
    "01-unit-missing.toml": [("unit-missing", 95, "pumps[PU-A].rate_max")],
    "02-unit-wrong.toml": [
        ("unit-wrong", 214, "lines[L-1].length"),
        ("unit-wrong", 324, "interlocks[BED-HOT].trip_when[1].above"),
    ],
    "03-key-unknown.toml": [
        ("key-missing", 118, "columns[COL].rating"),
        ("key-unknown", 122, "columns[COL].ratting"),
        ("key-unknown", 266, "sensors[PT-1].stale_afer"),
    ],
    "04-duplicate-tag.toml": [("duplicate-tag", 297, "sensors[TT-1].tag")],
    "05-line-leads-nowhere.toml": [
        ("part-without-inlet", 127, "cells[IR].id"),
        ("line-end-unknown", 220, "lines[L-2].to"),
    ],
    "06-pump-without-source.toml": [
        ("part-without-line", 47, "vessels[bottle-B].id"),
        ("pump-without-source", 74, "valves[V-B].positions"),
    ],
    "07-limit-above-rating.toml": [("limit-above-rating", 312, "interlocks[PRESSURE-HIGH].trip_when[2].above")],
    "08-syntax.toml": [("syntax-wrong", 75, "")],
    "09-recipe-lacks-pump.toml": [
        ("pump-missing", 57, "sweep.ratio"),
        ("pump-unknown", 57, "sweep.ratio.PU-C"),
        ("position-unknown", 73, "collect.position"),
    ],
    "10-recipe-too-hot.toml": [
        ("sheet-missing", 40, "switchover"),
        ("temperature-above-limit", 46, "sweep.temperature"),
    ],
}


@pytest.mark.parametrize("name", EXPECTED)
def test_a_broken_file_is_answered_at_line_and_key(name: str) -> None:
    path = BROKEN / name
    with pytest.raises(ConfigError) as caught:
        load_pair(RIG, path) if "recipe" in name else load_pair(path)

    problems = [problem for problem in caught.value.problems if problem.severity is Severity.ERROR]
    assert [(problem.code, problem.line, problem.key) for problem in problems] == EXPECTED[name]
    for problem in problems:
        assert problem.file == str(path)
        assert str(problem).startswith(f"{path}:{problem.line}: ")
        assert problem.remedy


def test_no_broken_file_is_without_an_expectation() -> None:
    assert sorted(path.name for path in BROKEN.iterdir()) == sorted(EXPECTED)
