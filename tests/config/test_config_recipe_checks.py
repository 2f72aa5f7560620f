"""Every check of a recipe against its rig: one thing is wrong, and exactly that is said, at its key and line."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pytest
from fakes.config_files import RECIPE, RIG, Edit, block, edited, problems_of

from rigd.model.problems import Severity

RATIO = "ratio = { PU-A = 1, PU-B = 1 }"
FLOWS = 'total_flow = { from = "0.8 mL/min", to = "4 mL/min", count = 6, spacing = "geometric" }'
SHEET = RECIPE[RECIPE.index("[sheet]") : RECIPE.index("[[checklist]]")]
SWITCHOVER = RECIPE[RECIPE.index("[switchover]") : RECIPE.index("[sweep]")]
SWEEP = RECIPE[RECIPE.index("[sweep]") : RECIPE.index("[settle]")]
SETTLE = RECIPE[RECIPE.index("[settle]") : RECIPE.index("[collect]")]
COLLECT = RECIPE[RECIPE.index("[collect]") : RECIPE.index("[flush]")]
POINTS = 'points = [{ PU-A = "1 mL/min", PU-B = "1 mL/min" }, { PU-A = "2 mL/min", PU-B = "1 mL/min" }]'


@dataclass(frozen=True)
class Row:
    """A finding about the recipe, and the edits of recipe and rig that provoke it."""

    code: str
    key: str
    on_line: str
    edits: tuple[Edit, ...]
    also: tuple[str, ...] = ()
    warning: bool = False
    rig: tuple[Edit, ...] = ()


ROWS = (
    Row(
        "park-below-regulator",
        "park.pressure_max",
        '"2 bar"',
        (('pressure_max = "2.5 bar"', 'pressure_max = "2 bar"'),),
    ),
    Row(
        "freezing",
        "sheet.freezes_below",
        "freezes_below",
        (("gas_evolution = false", 'gas_evolution = false\nfreezes_below = "10 degC"'),),
        (),
        False,
        (('safe_temperature = "20 degC"', 'safe_temperature = "10 degC"'),),
    ),
    Row(
        "solvent-incompatible",
        "sheet.solvent_compatible",
        "solvent_compatible",
        (("gas_evolution = false", "gas_evolution = false\nsolvent_compatible = false"),),
    ),
    Row(
        "stagnation-unsafe",
        "sheet.stagnation_safe",
        "stagnation_safe",
        (("stagnation_safe = true", "stagnation_safe = false"),),
        (),
        True,
    ),
    Row("duplicate-id", "checklist[bed].id", 'id = "bed"', (('id = "vent"', 'id = "bed"'),)),
    Row("points-missing", "switchover", "[switchover]", ((SWEEP, ""),)),
    Row("section-missing", "sweep", "[sweep]", ((SETTLE, ""),)),
    Row("section-missing", "sweep", "[sweep]", ((COLLECT, ""),)),
    Row("sheet-missing", "switchover", "[switchover]", ((SHEET, ""),)),
    # positions and signals
    Row(
        "position-unknown",
        "collect.position",
        "position",
        (('volume = "0.5 mL"', 'volume = "0.5 mL"\nposition = "flask"'),),
    ),
    Row(
        "position-unknown",
        "leak_test.shut_position",
        "shut_position",
        (('fill_time_max = "3 min"', 'fill_time_max = "3 min"\nshut_position = "closed"'),),
    ),
    Row(
        "position-wrong",
        "collect.position",
        'position = "waste"',
        (('volume = "0.5 mL"', 'volume = "0.5 mL"\nposition = "waste"'),),
    ),
    Row(
        "position-wrong",
        "collect.waste_position",
        "waste_position",
        (('volume = "0.5 mL"', 'volume = "0.5 mL"\nwaste_position = "shut"'),),
    ),
    Row(
        "position-wrong",
        "leak_test.shut_position",
        "shut_position",
        (('fill_time_max = "3 min"', 'fill_time_max = "3 min"\nshut_position = "waste"'),),
    ),
    Row("tag-unknown", "settle.signal", 'signal = "IR.convrsion"', (("IR.conversion", "IR.convrsion"),)),
    Row("comparison-wrong", "settle.signal", 'signal = "V-C.position"', (("IR.conversion", "V-C.position"),)),
    Row("unit-wrong", "settle.tolerance", 'tolerance = "1 bar"', (('"1 %"', '"1 bar"'),)),
    Row("value-out-of-range", "settle.tolerance", 'tolerance = "-1 %"', (('"1 %"', '"-1 %"'),)),
    # pumps and flows
    Row("pump-unknown", "sweep.ratio.PU-C", "PU-C", ((RATIO, "ratio = { PU-A = 1, PU-B = 1, PU-C = 1 }"),)),
    Row("pump-missing", "sweep.ratio", "ratio", ((RATIO, "ratio = { PU-A = 1 }"),)),
    Row(
        "pump-missing",
        "sweep.ratio[2]",
        "{ PU-B = 1 }",
        ((RATIO, "ratio = [\n  { PU-A = 1, PU-B = 1 },\n  { PU-B = 1 },\n]"),),
    ),
    Row(
        "pump-missing",
        "sweep.points[2]",
        "points",
        ((RATIO, ""), (FLOWS, POINTS.replace('"2 mL/min", PU-B = "1 mL/min"', '"2 mL/min"'))),
    ),
    Row(
        "point-duplicate",
        "sweep.points[2]",
        "points",
        ((RATIO, ""), (FLOWS, POINTS.replace('"2 mL/min"', '"1 mL/min"'))),
    ),
    Row("pump-unknown", "refill_below.PU-X", "PU-X", (("[sheet]", '[refill_below]\nPU-X = "0.5 mL"\n\n[sheet]'),)),
    Row(
        "refill-above-stroke",
        "refill_below.PU-A",
        "PU-A",
        (("[sheet]", '[refill_below]\nPU-A = "4.98 mL"\n\n[sheet]'),),
    ),
    Row(
        "flow-out-of-range",
        "sweep.total_flow",
        "total_flow",
        ((FLOWS, 'total_flow = "10.1 mL/min"'),),
        ("flow-out-of-range",),
    ),
    Row(
        "flow-out-of-range",
        "sweep.total_flow",
        "total_flow",
        ((FLOWS, 'total_flow = "9 uL/min"'),),
        ("flow-out-of-range",),
    ),
    Row(
        "flow-out-of-range",
        "sweep.residence_time",
        "residence_time",
        ((FLOWS, 'residence_time = "11 s"'),),
        ("flow-out-of-range",),
    ),
    Row(
        "flow-out-of-range",
        "prime.total_flow",
        '"11 mL/min"',
        (('[prime]\ntotal_flow = "4 mL/min"', '[prime]\ntotal_flow = "11 mL/min"'),),
    ),
    Row(
        "flow-out-of-range",
        "conditioning.total_flow",
        '"9 uL/min"',
        (('[conditioning]\ntotal_flow = "2 mL/min"', '[conditioning]\ntotal_flow = "9 uL/min"'),),
    ),
    Row(
        "flow-out-of-range",
        "leak_test.fill_flow",
        '"11 mL/min"',
        (('fill_flow = "0.4 mL/min"', 'fill_flow = "11 mL/min"'),),
    ),
    Row(
        "flow-out-of-range",
        "switchover.total_flow",
        '"11 mL/min"',
        (('stagger = true\ntotal_flow = "2 mL/min"', 'stagger = true\ntotal_flow = "11 mL/min"'),),
    ),
    Row(
        "flow-out-of-range",
        "flush.total_flow",
        '"11 mL/min"',
        (('[flush]\ntotal_flow = "4 mL/min"', '[flush]\ntotal_flow = "11 mL/min"'),),
    ),
    # times
    Row("range-empty", "conditioning.max_time", "max_time", (('min_time = "3 min"', 'min_time = "60 min"'),)),
    Row("range-empty", "conditioning.steady_for", "steady_for", (('steady_for = "1 min"', 'steady_for = "1 h"'),)),
    Row("range-empty", "settle.volumes_max", "volumes_max", (("volumes_max = 6", "volumes_max = 2.5"),)),
    # temperatures
    Row(
        "temperature-out-of-range",
        "sweep.temperature",
        "temperature",
        (('[sweep]\ntemperature = "60 degC"', '[sweep]\ntemperature = "-20 degC"'),),
    ),
    Row(
        "temperature-out-of-range",
        "park.temperature",
        "temperature",
        (('[park]\ntemperature = "20 degC"', '[park]\ntemperature = "-11 degC"'),),
    ),
    Row(
        "temperature-above-limit",
        "sweep.temperature[2]",
        '"75 degC"',
        (('[sweep]\ntemperature = "60 degC"', '[sweep]\ntemperature = [\n  "60 degC",\n  "75 degC",\n]'),),
    ),
    Row(
        "temperature-above-limit",
        "conditioning.temperature",
        '"70 degC"',
        (
            ('temperature = "60 degC"\nvolumes = 2', 'temperature = "70 degC"\nvolumes = 2'),
            ('temperature_limit = "75 degC"', 'temperature_limit = "65 degC"'),
        ),
        ("trip-above-sheet",),
    ),
    Row(
        "freezing",
        "park.temperature",
        '"15 degC"',
        (
            ('[park]\ntemperature = "20 degC"', '[park]\ntemperature = "15 degC"'),
            ("gas_evolution = false", 'gas_evolution = false\nfreezes_below = "15 degC"'),
        ),
    ),
    Row("temperature-uncontrolled", "sweep.temperature", "temperature", (), (), True, (('jacket = "CH"\n', ""),)),
    # pressures
    Row("leak-test-above-limit", "leak_test.pressure", '"8 bar"', (('pressure = "4 bar"', 'pressure = "8 bar"'),)),
    Row(
        "leak-test-above-limit",
        "leak_test.pressure",
        '"4 bar"',
        (('pressure_limit = "8 bar"', 'pressure_limit = "3.9 bar"'),),
        ("trip-above-sheet",),
    ),
    Row(
        "range-empty",
        "leak_test.largest_drop",
        "largest_drop",
        (('largest_drop = "0.3 bar"', 'largest_drop = "4 bar"'),),
    ),
    Row(
        "trip-above-sheet",
        "sheet.pressure_limit",
        "pressure_limit",
        (('pressure_limit = "8 bar"', 'pressure_limit = "7.9 bar"'),),
    ),
    Row(
        "trip-above-sheet",
        "sheet.temperature_limit",
        "temperature_limit",
        (('temperature_limit = "75 degC"', 'temperature_limit = "74 degC"'),),
    ),
    Row(
        "limit-unprotected",
        "sheet.temperature_limit",
        "temperature_limit",
        (),
        (),
        True,
        ((block(RIG, "BED-HOT"), ""),),
    ),
    # volumes
    Row(
        "flask-too-small",
        "collect.volume",
        '"42 mL"',
        (
            ('volume = "0.5 mL"', 'volume = "42 mL"'),
            (FLOWS, 'total_flow = ["4 mL/min", "3 mL/min", "2.5 mL/min", "2 mL/min", "1.5 mL/min", "1 mL/min"]'),
        ),
        (),
    ),
    Row(
        "bottle-short",
        "sweep.total_flow",
        "total_flow",
        (),
        (),
        False,
        (('liquid = "acid-feed"\ncontent = "230 mL"', 'liquid = "acid-feed"\ncontent = "10 mL"'),),
    ),
    Row(
        "bottle-tight",
        "sweep.total_flow",
        "total_flow",
        (),
        (),
        True,
        (('liquid = "acid-feed"\ncontent = "230 mL"', 'liquid = "acid-feed"\ncontent = "25 mL"'),),
    ),
    Row(
        "waste-too-small",
        "sweep.total_flow",
        "total_flow",
        (),
        (),
        True,
        (('role = "waste"\ncapacity = "2 L"', 'role = "waste"\ncapacity = "30 mL"'),),
    ),
    Row(
        "refill-too-slow",
        "sweep.total_flow",
        "total_flow",
        (),
        (),
        True,
        ((block(RIG, "PU-A"), block(RIG, "PU-A").replace('"8 mL/min"', '"2 mL/min"')),),
    ),
)


@pytest.mark.parametrize("row", ROWS, ids=lambda row: f"{row.code}-{row.key}")
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    recipe = edited(RECIPE, *row.edits)
    problems = problems_of(tmp_path, rig=edited(RIG, *row.rig), recipe=recipe)
    ours = [problem for problem in problems if problem.file.endswith("recipe.toml")]

    assert sorted(problem.code for problem in ours) == sorted((row.code, *row.also)), [str(p) for p in problems]
    found = next(problem for problem in ours if problem.code == row.code)
    assert found.key == row.key
    assert row.on_line in recipe.splitlines()[found.line - 1]
    assert found.message
    assert found.remedy
    assert (found.severity is Severity.WARNING) == row.warning


def test_the_untouched_recipe_says_nothing(tmp_path: Path) -> None:
    assert not problems_of(tmp_path)
