"""The nights file: paths to numbers, what is said of slips, the design made of it."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd.config.varied import Nights, read_nights
from rigd.model.errors import ConfigError
from rigd.nights.campaign import count_of, digest_of, jobs_of
from rigd.nights.probe import check

CONFIGS = Path(__file__).parents[2] / "configs"
EXAMPLE = CONFIGS / "nights" / "demo-nights.toml"
HEAD = f"""schema = "rigd-nights-1"
name = "test"
rig = "{CONFIGS / "rigs" / "two-pump-column.toml"}"
recipe = "{CONFIGS / "recipes" / "demo-sweep.toml"}"
nights = 8
"""


def read(folder: Path, body: str) -> Nights:
    path = folder / "nights.toml"
    path.write_text(HEAD + body, encoding="utf-8")
    return read_nights(path)


def vary(what: str, how: str) -> str:
    return f'[[vary]]\nwhat = "{what}"\n{how}\n'


def test_example_is_read_and_its_files_hold_the_numbers() -> None:
    nights = read_nights(EXAMPLE)
    assert count_of(nights) == 60
    jobs = jobs_of(nights)
    rate = jobs[3].files["chemistry"]["reactions"][0]["rate_constant"]
    assert float(rate.split()[0]) == pytest.approx(jobs[3].numbers["chemistry.reactions[esterification].rate_constant"])
    assert rate.endswith(" L/(mol s)")
    truth = jobs[3].files["rig"]["simulation"]["truth"]["COL.voidage"]
    assert 0.35 <= truth <= 0.41
    assert {job.files["recipe"]["settle"]["volumes"] for job in jobs} == {2.0, 2.5, 3.0}
    assert 1 <= sum(bool(job.faults) for job in jobs) <= 15
    assert check(nights)["PT-1"] == "bar"


def test_the_same_file_gives_the_same_jobs() -> None:
    first, again = (jobs_of(read_nights(EXAMPLE)) for _ in range(2))
    assert first == again


SLIPS = [
    ("rig.columns[COLL].packing.voidage", 'uniform = ["0.3", "0.4"]', "path-unknown", "did you mean 'COL'"),
    ("rig.columns[COL].packing.voidge", 'uniform = ["0.3", "0.4"]', "path-unknown", "did you mean 'voidage'"),
    ("rgi.columns[COL].packing.voidage", 'uniform = ["0.3", "0.4"]', "path-unknown", "did you mean 'rig'"),
    ("rig.columns[COL].packing", 'uniform = ["0.3", "0.4"]', "path-unknown", "is no number"),
    ("recipe.settle.tolerance", 'uniform = ["1 %", "2 mL"]', "unit-wrong", "1 %"),
    ("recipe.settle.volumes", 'uniform = ["2 mL", "3 mL"]', "unit-wrong", "the file has 2.5"),
    ("recipe.settle.volumes", "uniform = [3, 2]", "range-empty", "[3"),
    ("recipe.settle.volumes", "normal = [3, 0]", "range-empty", "[3"),
    ("recipe.settle.volumes", "lognormal = [3, 0.5]", "range-empty", "[3"),
    ("recipe.settle.volumes", "", "vary-unclear", "exactly one"),
    ("recipe.settle.volumes", "choose = [1]\nuniform = [1, 2]", "vary-unclear", "choose"),
    ("recipe.settle.volumes", 'choose = ["two"]', "quantity-unreadable", "two"),
]


@pytest.mark.parametrize(("what", "how", "code", "words"), SLIPS, ids=[f"{s[2]}-{i}" for i, s in enumerate(SLIPS)])
def test_slips_are_said_with_the_nearest_name(what: str, how: str, code: str, words: str, tmp_path: Path) -> None:
    with pytest.raises(ConfigError) as caught:
        read(tmp_path, vary(what, how))
    (problem,) = caught.value.problems
    assert problem.code == code
    assert words in problem.message
    assert problem.remedy
    assert problem.line > 5


def test_all_combinations_need_choices(tmp_path: Path) -> None:
    body = 'design = "all combinations"\n'
    with pytest.raises(ConfigError) as caught:
        read(tmp_path, body + vary("recipe.settle.volumes", "uniform = [2, 3]"))
    assert caught.value.problems[0].code == "design-wrong"
    nights = read(
        tmp_path,
        body + vary("recipe.settle.volumes", "choose = [2, 3]") + vary("recipe.settle.window", "choose = [8, 12, 16]"),
    )
    assert count_of(nights) == len(jobs_of(nights)) == 6
    assert {type(job.files["recipe"]["settle"]["window"]) for job in jobs_of(nights)} == {int}


def test_sobol_says_how_many_nights_it_takes(tmp_path: Path) -> None:
    body = 'design = "sobol"\n' + vary("recipe.settle.volumes", "uniform = [2, 3]")
    nights = read(tmp_path, body)
    assert count_of(nights) == len(jobs_of(nights)) == 6


def test_wrong_files_are_said_under_their_own_names(tmp_path: Path) -> None:
    nights = read(tmp_path, vary("recipe.settle.tolerance", 'uniform = ["1 bar", "2 bar"]'))
    with pytest.raises(ConfigError) as caught:
        check(nights)
    assert caught.value.problems[0].code == "unit-wrong"
    assert caught.value.problems[0].file.endswith("demo-sweep.toml")


def test_a_wrong_fault_is_said_before_the_first_night(tmp_path: Path) -> None:
    nights = read(tmp_path, '[[faults]]\nkind = "clogg"\ntarget = "COL"\nat = ["1 min", "2 min"]\n')
    with pytest.raises(ConfigError, match="clogg"):
        check(nights)


def test_digest_follows_what_matters(tmp_path: Path) -> None:
    one = read(tmp_path, vary("recipe.settle.volumes", "choose = [2, 3]"))
    other = read(tmp_path, vary("recipe.settle.volumes", "choose = [2, 4]"))
    assert digest_of(one) == digest_of(read(tmp_path, vary("recipe.settle.volumes", "choose = [2, 3]")))
    assert digest_of(one) != digest_of(other)
