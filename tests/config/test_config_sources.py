"""Files that are no rig at all, or hardly one: still one clear answer each."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import CHEMISTRY, RECIPE, RIG, edited, problems_of, rig_problems_of, within, write

from rigd.config import read_rig
from rigd.config.source import LARGEST_BYTES
from rigd.config.structure import MOST_FINDINGS


def test_a_part_without_a_usable_id_is_counted(tmp_path: Path) -> None:
    problems = rig_problems_of(tmp_path, edited(RIG, *within("PU-B", 'id = "PU-B"\n', "")))

    assert ("key-missing", "pumps[2].id") in [(problem.code, problem.key) for problem in problems]


@pytest.mark.parametrize(
    ("raw", "code", "line"),
    [
        (b'name = "x\n', "syntax-wrong", 1),
        (b"a = 1\nb = [1, 2\n", "syntax-wrong", 2),
        (b"a = 1\na = 2\n", "syntax-wrong", 2),
        (b'a = 1\nb = "\xff"\n', "encoding-wrong", 2),
        (b"\xef\xbb\xbfa = 1\n", "syntax-wrong", 1),
        (b"a = " + b"[" * 3000, "syntax-wrong", 0),
        (b"a = 1979-05-27T25:00:00Z\n", "syntax-wrong", 1),
        (b"a = " + b"9" * 5000 + b"\n", "syntax-wrong", 0),
        (b"#" * (LARGEST_BYTES + 1), "file-too-large", 0),
    ],
)
def test_what_is_no_toml_is_one_finding(raw: bytes, code: str, line: int, tmp_path: Path) -> None:
    path = tmp_path / "rig.toml"
    path.write_bytes(raw)
    problems = read_rig(path).problems

    assert [(problem.code, problem.line) for problem in problems] == [(code, line)], [str(p) for p in problems]
    assert problems[0].remedy


def test_a_byte_order_mark_is_named(tmp_path: Path) -> None:
    path = tmp_path / "rig.toml"
    path.write_bytes(b"\xef\xbb\xbfa = 1\n")

    assert "byte-order mark" in read_rig(path).problems[0].message


def test_an_empty_file_lacks_every_section(tmp_path: Path) -> None:
    path = tmp_path / "rig.toml"
    path.write_bytes(b"")
    missing = {problem.key for problem in read_rig(path).problems}

    assert {"schema", "name", "pumps", "lines", "devices"} <= missing


def test_a_flood_of_findings_is_cut_short(tmp_path: Path) -> None:
    flood = RIG + "".join(f"\n[[tees]]\nid = {i}\n" for i in range(3 * MOST_FINDINGS))
    problems = rig_problems_of(tmp_path, flood)

    assert MOST_FINDINGS <= len(problems) <= MOST_FINDINGS + 20


def test_a_broken_chemistry_does_not_hide_the_rig(tmp_path: Path) -> None:
    problems = problems_of(tmp_path, rig=edited(RIG, *within("PU-A", '"5 mL/min"', '"5"')), chemistry=CHEMISTRY + "\n=")

    assert [(problem.code, Path(problem.file).name) for problem in problems] == [
        ("unit-missing", "rig.toml"),
        ("syntax-wrong", "esterification.toml"),
    ]


def test_a_recipe_as_chemistry_is_named_as_such(tmp_path: Path) -> None:
    rig_path, _ = write(tmp_path, chemistry=RECIPE)

    assert [problem.code for problem in read_rig(rig_path).problems] == ["file-kind-wrong"]
