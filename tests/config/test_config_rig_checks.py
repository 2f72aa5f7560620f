"""A rig file as a whole: everything is told at once, in order, and nothing twice or for want of something else."""

from __future__ import annotations

from pathlib import Path

from fakes.config_files import RIG, block, edited, rig_problems_of, within, without, write

from rigd.config import load_rig, read_rig
from rigd.model.problems import Severity


def test_the_untouched_example_says_nothing(tmp_path: Path) -> None:
    assert not rig_problems_of(tmp_path, RIG)


def test_warnings_alone_let_the_rig_pass(tmp_path: Path) -> None:
    path, _ = write(tmp_path, edited(RIG, (block(RIG, "PRESSURE-HIGH"), "")))

    assert [problem.code for problem in read_rig(path).problems] == ["rating-unprotected"]
    assert load_rig(path).name == "two-pump-column"


def test_a_circle_of_lines_is_no_flow_path(tmp_path: Path) -> None:
    """All local rules are met, but the liquid would run round for ever."""
    rig = edited(
        RIG,
        *within("L-4", 'to = "V-C"', 'to = "TEE"'),
        *without("L-5", "L-6", "V-C", "flask", "waste", "valve-c", "FLASK-NEARLY-FULL"),
    )
    codes = {problem.code for problem in rig_problems_of(tmp_path, rig)}

    assert codes == {"no-way-to-waste", "no-way-to-collect"}


def test_two_separate_trains_are_no_flow_path(tmp_path: Path) -> None:
    """Each pump has its source and its waste, but they never meet."""
    rig = edited(RIG, *within("L-B3", 'to = "TEE"', 'to = "waste"'))
    problems = rig_problems_of(tmp_path, rig)

    assert [problem.code for problem in problems if problem.severity is Severity.ERROR] == ["flow-path"]
    assert "PU-B" in " ".join(problem.message for problem in problems)


def test_all_problems_are_told_at_once_and_in_order_of_lines(tmp_path: Path) -> None:
    """Structure and meaning together, and a broken table does not make others break."""
    rig = edited(
        RIG,
        *within("PU-A", 'rate_max = "5 mL/min"', 'rate_maximum = "5 mL/min"'),
        *within("TT-1", "COL.middle", "COL.centre"),
        *within("BED-HOT", '"TT-1"', '"TT-9"'),
        *within("FLASK-NEARLY-FULL", 'action = "Exchange the flask at the next hold."', ""),
        *within("L-5", 'bore = "0.5 mm"', 'bore = "0.5"'),
    )
    problems = rig_problems_of(tmp_path, rig)

    assert [(problem.code, problem.key) for problem in problems] == [
        ("key-missing", "pumps[PU-A].rate_max"),
        ("key-unknown", "pumps[PU-A].rate_maximum"),
        ("unit-missing", "lines[L-5].bore"),
        ("place-unknown", "sensors[TT-1].at"),
        ("tag-unknown", "interlocks[BED-HOT].trip_when[1].tag"),
        ("alarm-without-action", "alarms[FLASK-NEARLY-FULL].action"),
    ]
    lines = [problem.line for problem in problems]
    assert lines == sorted(lines)


def test_a_tag_of_a_broken_sensor_is_not_called_unknown(tmp_path: Path) -> None:
    rig = edited(RIG, *within("TT-1", 'lag = "3 s"', "lag = 3"))

    assert [problem.code for problem in rig_problems_of(tmp_path, rig)] == ["unit-missing"]


def test_names_near_the_wrong_one_are_offered(tmp_path: Path) -> None:
    rig = edited(RIG, *within("BED-HOT", '"TT-1"', '"tt1"'), *within("L-4", 'to = "V-C"', 'to = "VC"'))
    messages = {problem.code: problem.message for problem in rig_problems_of(tmp_path, rig)}

    assert "did you mean 'TT-1'?" in messages["tag-unknown"]
    assert "did you mean 'V-C'?" in messages["line-end-unknown"]
