"""Structural findings of every kind: code, key, and words that a person can act on."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import RECIPE, RIG, Edit, edited, problems_of, rig_problems_of, within

from rigd.model.problems import Severity

ROWS: tuple[tuple[str, str, tuple[Edit, ...], tuple[str, ...]], ...] = (
    ("unit-missing", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"5"'), ("'5'", "mL/min, uL/min")),
    ("unit-missing", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', "5"), ("5 has no unit", "mL/min")),
    ("unit-unknown", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"5 ml/min"'), ("did you mean 'mL/min'",)),
    ("unit-wrong", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"5 bar"'), ("is a pressure", "a flow")),
    ("quantity-unreadable", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"5,0 mL/min"'), ("decimal comma",)),
    ("quantity-unreadable", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"1e400 mL/min"'), ("1e400",)),
    ("quantity-unreadable", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"1e15 mL/min"'), ("1e15",)),
    ("type-wrong", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', "true"), ("true or false", "unit")),
    ("type-wrong", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '["5 mL/min"]'), ("a list",)),
    ("type-wrong", "pumps[PU-A].syringes", within("PU-A", "syringes = 2", 'syringes = "2"'), ("'2'", "whole number")),
    ("type-wrong", "columns[COL].packing", within("COL", "packing = {", "packing = [1] #"), ("a table",)),
    ("type-wrong", "valves[V-A].positions", within("V-A", '["solvent", "reagent"]', '"solvent"'), ("a list",)),
    ("type-wrong", "liquids[solvent].composition", within("solvent", '{ ethanol = "17.0 mol/L" }', "1"), ("a table",)),
    ("value-out-of-range", "pumps[PU-A].rate_max", within("PU-A", '"5 mL/min"', '"0 mL/min"'), ("above zero",)),
    ("value-out-of-range", "pumps[PU-A].dead_volume", within("PU-A", '"0.02 mL"', '"-1 uL"'), ("not be negative",)),
    ("value-out-of-range", "pumps[PU-A].syringes", within("PU-A", "syringes = 2", "syringes = 3"), ("at most 2",)),
    ("value-out-of-range", "columns[COL].packing.voidage", within("COL", '"0.38"', '"38"'), ("below 1",)),
    ("value-out-of-range", "scan", (('scan = "100 ms"', 'scan = "1 ms"'),), ("at least 0.01",)),
    (
        "value-out-of-range",
        "sensors[PT-1].span",
        within("PT-1", '["0 bar", "25 bar"]', '["25 bar", "0 bar"]'),
        ("lower",),
    ),
    (
        "choice-unknown",
        "vessels[waste].role",
        within("waste", 'role = "waste"', 'role = "wast"'),
        ("supply, collect, waste", "did you mean 'waste'"),
    ),
    ("choice-unknown", "interlocks[BED-HOT].stop", within("BED-HOT", '"quench"', '"flush"'), ("cut, quench, hold",)),
    ("choice-unknown", "schema", (('"rigd-rig-1"', '"rigd-rig-9"'),), ("rigd-rig-1",)),
    ("text-malformed", "pumps[PU A].id", within("PU-A", 'id = "PU-A"', 'id = "PU A"'), ("letters, digits",)),
    ("text-malformed", "lines[L-1].from", within("L-1", '"TEE"', '"TEE/1"'), ("'TEE/1'",)),
    ("text-malformed", "links[bus-1].port", within("bus-1", '"simulated"', '""'), ("empty",)),
    ("list-length", "valves[V-A].positions", within("V-A", '["solvent", "reagent"]', '["solvent"]'), ("at least 2",)),
    ("list-length", "chillers[CH].range[2]", within("CH", '["-10 degC", "95 degC"]', '["-10 degC"]'), ("two values",)),
    (
        "list-length",
        "chillers[CH].range",
        within("CH", '["-10 degC", "95 degC"]', '["0 degC", "1 degC", "2 degC"]'),
        ("at most 2",),
    ),
    ("key-unknown", "scann", (('scan = "100 ms"', 'scann = "100 ms"'),), ("did you mean 'scan'",)),
    (
        "key-unknown",
        "columns[COL].packing.voidge",
        within("COL", 'mass = "1.1 g"', 'mass = "1.1 g", voidge = "1"'),
        ("did you mean 'voidage'",),
    ),
    (
        "key-missing",
        "pumps[PU-A].bore",
        within("PU-A", 'bore = "10.30 mm"\n', ""),
        ("'bore' is missing", "a pump with syringes"),
    ),
    (
        "key-missing",
        "interlocks[BED-HOT].response",
        within("BED-HOT", 'response = "Watch the flush; check the chiller and the bed before a new start."\n', ""),
        ("missing or empty",),
    ),
    (
        "alarm-without-action",
        "alarms[FLASK-NEARLY-FULL].action",
        within("FLASK-NEARLY-FULL", 'action = "Exchange the flask at the next hold."', 'action = ""'),
        ("missing or empty",),
    ),
    (
        "condition-wrong",
        "interlocks[BED-HOT].trip_when[1]",
        within("BED-HOT", 'above = "75 degC"', 'above = "75 degC", below = "0 degC"'),
        ("above and below", "exactly one"),
    ),
    (
        "condition-wrong",
        "interlocks[BED-HOT].trip_when[1]",
        within("BED-HOT", ', above = "75 degC"', ""),
        ("found none",),
    ),
    (
        "condition-wrong",
        "interlocks[JACKET-ADRIFT].trip_when[1]",
        within("JACKET-ADRIFT", ', by = "6 K"', ""),
        ("belong together",),
    ),
    (
        "condition-wrong",
        "interlocks[BED-HOT].trip_when[1]",
        within("BED-HOT", 'above = "75 degC"', 'above = "75 degC", window = "9 s"'),
        ("rate_above",),
    ),
    ("span-or-labels", "sensors[PT-1]", within("PT-1", 'span = ["0 bar", "25 bar"]\n', ""), ("needs 'span'",)),
    (
        "span-or-labels",
        "sensors[PT-1]",
        within("PT-1", 'measures = "pressure"', 'measures = "state"'),
        ("needs 'labels'",),
    ),
    (
        "unit-wrong",
        "sensors[PT-1].span",
        within("PT-1", '["0 bar", "25 bar"]', '["0 degC", "25 degC"]'),
        ("a pressure",),
    ),
    ("unit-wrong", "sensors[TT-1].noise", within("TT-1", '"0.05 K"', '"0.05 degC"'), ("temperature difference",)),
    (
        "unit-missing",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', "75"),
        ("75 has no unit",),
    ),
    (
        "unit-missing",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', '"75"'),
        ("'75' has no unit",),
    ),
    (
        "unit-unknown",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', '"75 C"'),
        ("unknown unit 'C'",),
    ),
    (
        "quantity-unreadable",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', '"hot"'),
        ("'hot'",),
    ),
    (
        "quantity-unreadable",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', '"7,5 degC"'),
        ("'7,5",),
    ),
    (
        "type-wrong",
        "interlocks[BED-HOT].trip_when[1].above",
        within("BED-HOT", '"75 degC"', "false"),
        ("true or false",),
    ),
    (
        "value-out-of-range",
        "devices[ir].options",
        within("ir", 'link = "ir-port"', 'link = "ir-port"\noptions = { a = [[[[[[[1]]]]]]] }'),
        ("deep",),
    ),
)


@pytest.mark.parametrize(
    ("code", "key", "edits", "words"), ROWS, ids=[f"{row[0]}-{row[1]}-{i}" for i, row in enumerate(ROWS)]
)
def test_structural_findings_say_what_was_found_and_what_is_allowed(
    code: str, key: str, edits: tuple[Edit, ...], words: tuple[str, ...], tmp_path: Path
) -> None:
    problems = rig_problems_of(tmp_path, edited(RIG, *edits))
    found = [problem for problem in problems if (problem.code, problem.key) == (code, key)]

    assert len(found) == 1, [str(problem) for problem in problems]
    assert found[0].severity is Severity.ERROR
    assert found[0].line > 1
    assert found[0].remedy
    for word in words:
        assert word in found[0].message, found[0].message


RECIPE_ROWS: tuple[tuple[str, str, tuple[Edit, ...]], ...] = (
    (
        "time-unreadable",
        "permit.end",
        (
            (
                "[sheet]",
                '[permit]\napproved_by = "a"\nnumber = "1"\ncontacts = ["a","b"]\nend = 2035-01-01T00:00:00\n\n[sheet]',
            ),
        ),
    ),
    (
        "time-unreadable",
        "permit.end",
        (("[sheet]", '[permit]\napproved_by = "a"\nnumber = "1"\ncontacts = ["a", "b"]\nend = "soon"\n\n[sheet]'),),
    ),
    ("type-wrong", "sheet.stagnation_safe", (("stagnation_safe = true", 'stagnation_safe = "yes"'),)),
    ("value-out-of-range", "settle.window", (("window = 12", "window = 2"),)),
    ("key-missing", "sheet.signed_by", (('signed_by = "demonstration, nobody"', 'signed_by = ""'),)),
    ("type-wrong", "sweep", (("[sweep]", 'sweep = "fast"\n[sweeep]'),)),
)


@pytest.mark.parametrize(
    ("code", "key", "edits"), RECIPE_ROWS, ids=lambda value: value if isinstance(value, str) else ""
)
def test_structural_findings_in_a_recipe(code: str, key: str, edits: tuple[Edit, ...], tmp_path: Path) -> None:
    recipe = edited(RECIPE, *edits)
    if key == "sweep":  # the key must stand before the first table
        recipe = 'sweep = "fast"\n' + RECIPE.replace("[sweep]", "[sweeep]")
    problems = problems_of(tmp_path, recipe=recipe)

    assert (code, key) in [(problem.code, problem.key) for problem in problems], [str(p) for p in problems]


def test_a_list_whose_members_are_all_wrong_is_not_called_too_short(tmp_path: Path) -> None:
    problems = rig_problems_of(tmp_path, RIG.replace('bore = "10.30 mm"', 'bohre = "10.30 mm"'))
    assert "list-length" not in {problem.code for problem in problems}
    assert [problem.key for problem in problems if problem.code == "key-unknown"] == [
        "pumps[PU-A].bohre",
        "pumps[PU-B].bohre",
    ]
