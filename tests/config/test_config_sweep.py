"""The points of a sweep: forms, order, repeats, returns, blanks."""

from __future__ import annotations

import random
from pathlib import Path

import pytest
from fakes.config_files import CONFIGS, RECIPE, RIG, block, edited, problems_of, write

from rigd.config import load_recipe, load_rig
from rigd.config.sweep import total_mL_min
from rigd.logic.flow_path import flow_path
from rigd.model.problems import Severity
from rigd.model.recipe import Point, PointKind
from rigd.model.rig import RigDefinition

SWEEP = RECIPE[RECIPE.index("[sweep]") : RECIPE.index("[settle]")]
RATIO = "ratio = { PU-A = 1, PU-B = 1 }"


@pytest.fixture(scope="module")
def rig() -> RigDefinition:
    return load_rig(CONFIGS / "rigs/two-pump-column.toml")


def points(folder: Path, rig: RigDefinition, *lines: str) -> tuple[Point, ...]:
    """The points of a sweep with these lines."""
    recipe = edited(RECIPE, (SWEEP, "[sweep]\n" + "\n".join(lines) + "\n\n"))
    return load_recipe(write(folder, recipe=recipe)[1], rig).points


def totals(found: tuple[Point, ...]) -> list[float]:
    return [round(point.total_mL_min, 6) for point in found]


def test_total_flows_are_divided_by_the_ratio(tmp_path: Path, rig: RigDefinition) -> None:
    found = points(
        tmp_path, rig, 'temperature = "40 degC"', "ratio = { PU-A = 1, PU-B = 3 }", 'total_flow = "2 mL/min"'
    )

    assert [point.id for point in found] == ["P01"]
    assert found[0].flows_mL_min == {"PU-A": 0.5, "PU-B": 1.5}
    assert found[0].temperature_degC == 40.0
    assert found[0].kind is PointKind.POINT


def test_without_a_ratio_the_pumps_share_evenly(tmp_path: Path, rig: RigDefinition) -> None:
    found = points(tmp_path, rig, 'temperature = "40 degC"', 'total_flow = ["1 mL/min", "500 uL/min"]')

    assert [dict(point.flows_mL_min) for point in found] == [{"PU-A": 0.5, "PU-B": 0.5}, {"PU-A": 0.25, "PU-B": 0.25}]


@pytest.mark.parametrize(("spacing", "expected"), [("linear", [1.0, 2.5, 4.0]), ("geometric", [1.0, 2.0, 4.0])])
def test_ranges_hold_both_ends(spacing: str, expected: list[float], tmp_path: Path, rig: RigDefinition) -> None:
    span = f'total_flow = {{ from = "1 mL/min", to = "4 mL/min", count = 3, spacing = "{spacing}" }}'

    assert totals(points(tmp_path, rig, 'temperature = "40 degC"', span)) == expected


def test_residence_time_is_column_liquid_over_total_flow(tmp_path: Path, rig: RigDefinition) -> None:
    """Mean residence time V/Q (Levenspiel, Chemical Reaction Engineering, 3rd ed. 1999, ch. 13; from memory)."""
    found = points(tmp_path, rig, 'temperature = "40 degC"', 'residence_time = ["60 s", "4 min"]')
    column_mL = flow_path(rig).column_mL

    # by hand: 6.6 mm bore, 100 mm, (0.38 + 0.62 * 0.31) of it liquid
    assert column_mL == pytest.approx(3.141592653589793 / 4 * 0.66**2 * 10.0 * 0.5722, rel=1e-12)
    assert totals(found) == [round(column_mL, 6), round(column_mL / 4, 6)]


def test_residence_times_of_two_columns_add_up() -> None:
    """The first column sees two pumps, the second all three."""
    path = flow_path(load_rig(CONFIGS / "rigs/three-pump-two-columns.toml"))
    shares = {"PU-A": 0.25, "PU-B": 0.25, "PU-D": 0.5}
    total = total_mL_min(path, shares, 300.0)

    volumes = [sum(s.volume_mL for s in section.segments if s.kind == "column") for section in path.sections]
    assert 60 * (volumes[0] / (0.5 * total) + volumes[1] / total) == pytest.approx(300.0, rel=1e-12)


def test_order_is_of_what_is_swept(tmp_path: Path, rig: RigDefinition) -> None:
    flows = 'total_flow = ["2 mL/min", "1 mL/min", "3 mL/min"]'
    times = 'residence_time = ["60 s", "120 s"]'
    at = 'temperature = "40 degC"'

    assert totals(points(tmp_path, rig, at, flows)) == [2, 1, 3]
    assert totals(points(tmp_path, rig, at, flows, 'order = "ascending"')) == [1, 2, 3]
    assert totals(points(tmp_path, rig, at, flows, 'order = "descending"')) == [3, 2, 1]
    slow_first = totals(points(tmp_path, rig, at, times, 'order = "descending"'))
    assert slow_first == sorted(slow_first)


def test_random_order_is_the_one_of_the_seed(tmp_path: Path, rig: RigDefinition) -> None:
    lines = ('temperature = "40 degC"', f"total_flow = {[f'{i} mL/min' for i in range(1, 9)]}", 'order = "random"')
    expected = [float(i) for i in range(1, 9)]
    random.Random(5).shuffle(expected)

    assert totals(points(tmp_path, rig, *lines, "seed = 5")) == expected
    assert totals(points(tmp_path, rig, *lines, "seed = 6")) != expected


def test_temperatures_are_the_outer_loop_and_ratios_the_next(tmp_path: Path, rig: RigDefinition) -> None:
    found = points(
        tmp_path,
        rig,
        'temperature = ["40 degC", "50 degC"]',
        "ratio = [{ PU-A = 1, PU-B = 1 }, { PU-A = 1, PU-B = 3 }]",
        'total_flow = ["2 mL/min", "1 mL/min"]',
    )

    assert [(p.id, p.temperature_degC, round(p.flows_mL_min["PU-A"], 3)) for p in found] == [
        ("P01", 40, 1.0), ("P02", 40, 0.5), ("P03", 40, 0.5), ("P04", 40, 0.25),
        ("P05", 50, 1.0), ("P06", 50, 0.5), ("P07", 50, 0.5), ("P08", 50, 0.25),
    ]  # fmt: skip


def test_repeats_make_new_points(tmp_path: Path, rig: RigDefinition) -> None:
    lines = ('temperature = "40 degC"', 'total_flow = ["2 mL/min", "1 mL/min"]', "repeats = 2")

    assert totals(points(tmp_path, rig, *lines)) == [2, 1, 2, 1]
    assert totals(points(tmp_path, rig, *lines, 'order = "ascending"')) == [1, 1, 2, 2]
    assert [point.id for point in points(tmp_path, rig, *lines)] == ["P01", "P02", "P03", "P04"]


def test_returns_and_blanks_stand_where_they_should(tmp_path: Path, rig: RigDefinition) -> None:
    found = points(
        tmp_path,
        rig,
        'temperature = ["40 degC", "50 degC"]',
        'total_flow = ["1 mL/min", "2 mL/min", "3 mL/min"]',
        "return_every = 2",
        "blank_every = 3",
    )

    assert [point.id for point in found] == [
        "P01", "P02", "P01-return-1", "P03", "blank-1", "P04", "P05", "P04-return-1", "P06", "blank-2",
    ]  # fmt: skip
    back = found[2]
    assert (back.kind, back.of, back.flows_mL_min) == (PointKind.RETURN, "P01", found[0].flows_mL_min)
    blank = found[4]
    assert (blank.kind, blank.of, blank.total_mL_min) == (PointKind.BLANK, "", 3.0)
    assert found[7].temperature_degC == 50.0


def test_stated_points_are_taken_as_they_are(tmp_path: Path, rig: RigDefinition) -> None:
    stated = 'points = [{ PU-A = "1 mL/min", PU-B = "2 mL/min" }, { PU-A = "1 mL/min", PU-B = "1 mL/min" }]'
    found = points(tmp_path, rig, 'temperature = "40 degC"', stated, 'order = "ascending"')

    assert totals(found) == [2, 3]
    assert found[1].flows_mL_min == {"PU-A": 1.0, "PU-B": 2.0}


@pytest.mark.parametrize(
    ("lines", "code", "key"),
    [
        (('temperature = "40 degC"',), "sweep-form", "sweep"),
        (('temperature = "40 degC"', 'total_flow = "1 mL/min"', 'residence_time = "1 min"'), "sweep-form", "sweep"),
        (('temperature = "40 degC"', "points = []"), "list-length", "sweep.points"),
        (('temperature = "40 degC"', "total_flow = []"), "list-length", "sweep.total_flow"),
        (
            ('temperature = "40 degC"', RATIO, 'points = [{ PU-A = "1 mL/min", PU-B = "1 mL/min" }]'),
            "sweep-form",
            "sweep",
        ),
        (('total_flow = "1 mL/min"',), "key-missing", "sweep.temperature"),
        (
            ('temperature = "40 degC"', 'total_flow = { from = "1 mL/min", to = "2 mL/min", cuont = 3 }'),
            "key-unknown",
            "sweep.total_flow.cuont",
        ),
        (('temperature = "40 degC"', 'total_flow = ["1 mL/min", "2 bar"]'), "unit-wrong", "sweep.total_flow[2]"),
        (('temperature = ["40 degC", "50"]', 'total_flow = "1 mL/min"'), "unit-missing", "sweep.temperature[2]"),
        (
            ('temperature = "40 degC"', 'total_flow = "1 mL/min"', "ratio = { PU-A = 0, PU-B = 1 }"),
            "value-out-of-range",
            "sweep.ratio.PU-A",
        ),
    ],
)
def test_wrong_sweeps_are_told_at_their_key(lines: tuple[str, ...], code: str, key: str, tmp_path: Path) -> None:
    problems = problems_of(tmp_path, recipe=edited(RECIPE, (SWEEP, "[sweep]\n" + "\n".join(lines) + "\n\n")))

    assert (code, key) in [(problem.code, problem.key) for problem in problems], [str(p) for p in problems]


def test_a_rig_without_column_has_no_residence_time(tmp_path: Path) -> None:
    rig = edited(
        RIG,
        (block(RIG, "COL"), ""),
        (block(RIG, "L-2"), ""),
        (block(RIG, "L-1"), block(RIG, "L-1").replace('"COL"', '"IR"')),
        *((part, part.replace("COL.middle", "IR").replace("COL.jacket", "CH")) for part in map(tag, ("TT-1", "TT-2"))),
        (', "PU-A.compliance_mL_bar"', '"PU-A.compliance_mL_bar"'),
        ('"COL.voidage" = 0.385', ""),
    )
    sweep = '[sweep]\ntemperature = "40 degC"\nresidence_time = "1 min"\n\n'
    problems = problems_of(tmp_path, rig=rig, recipe=edited(RECIPE, (SWEEP, sweep)))

    errors = [(problem.code, problem.key) for problem in problems if problem.severity is Severity.ERROR]
    assert errors == [("no-column", "sweep.residence_time")], [str(problem) for problem in problems]


@pytest.mark.parametrize(
    ("key", "values"),
    [
        ("total_flow", '["1 mL/min", "1000 uL/min"]'),
        ("residence_time", '["2 min", "120 s"]'),
    ],
)
def test_the_same_twice_is_refused_in_whatever_unit(key: str, values: str, tmp_path: Path) -> None:
    sweep = f'[sweep]\ntemperature = ["40 degC", "40 degC"]\n{key} = {values}\n\n'
    problems = problems_of(tmp_path, recipe=edited(RECIPE, (SWEEP, sweep)))

    found = [(problem.code, problem.key) for problem in problems]
    assert found == [("point-duplicate", "sweep.temperature[2]"), ("point-duplicate", f"sweep.{key}[2]")]


def tag(name: str) -> str:
    """The table of a sensor of the example rig."""
    return block(RIG, name)
