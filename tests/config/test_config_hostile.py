"""Any text, any bytes, any damage to the examples: findings, or a rig, and never another exception."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from fakes.config_files import CHEMISTRY, CONFIGS, RECIPE, RIG, write
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rigd.config import load_pair, load_rig
from rigd.model.errors import ConfigError

FOLDER_FIXTURE = [HealthCheck.function_scoped_fixture]
HOSTILE = settings(max_examples=60, deadline=None, suppress_health_check=FOLDER_FIXTURE)

CHUNKS = re.split(r"(\s+)", RIG)
WORDS = sorted(
    set(RIG.split())
    | set(RECIPE.split())
    | {"-1", "0", "1e999", "nan", "inf", "[", "]", "{}", '""', "=", "\x00", "'''"}
)


def survives(folder: Path, rig: bytes, recipe: bytes, chemistry: bytes) -> None:
    """Load; whatever comes is a pair or findings, each with a message and the file it is about."""
    rig_path, recipe_path = write(folder)
    rig_path.write_bytes(rig)
    recipe_path.write_bytes(recipe)
    (folder / "chemistry/esterification.toml").write_bytes(chemistry)
    try:
        problems = load_pair(rig_path, recipe_path).warnings
    except ConfigError as error:
        problems = error.problems
        assert problems
    for problem in problems:
        assert problem.message
        assert problem.file.startswith(str(folder))


@HOSTILE
@given(
    raw=st.one_of(
        st.binary(max_size=400), st.text(max_size=400).map(lambda text: text.encode("utf-8", "surrogatepass"))
    )
)
def test_any_bytes(raw: bytes, tmp_path: Path) -> None:
    survives(tmp_path, raw, raw, raw)


@st.composite
def damaged(draw: st.DrawFn, text: str) -> bytes:
    """An example with a few words exchanged, dropped or doubled, or a stretch cut out."""
    words = re.split(r"(\s+)", text)
    for _ in range(draw(st.integers(1, 4))):
        place = draw(st.integers(0, len(words) - 1))
        what = draw(st.integers(0, 3))
        if what == 0:
            words[place] = draw(st.sampled_from(WORDS))
        elif what == 1:
            words[place] = ""
        elif what == 2:
            words.insert(place, draw(st.sampled_from(WORDS)))
        else:
            del words[place : place + draw(st.integers(1, 40))]
            words = words or [""]
    return "".join(words).encode("utf-8")


@HOSTILE
@given(rig=damaged(RIG))
def test_a_damaged_rig(rig: bytes, tmp_path: Path) -> None:
    survives(tmp_path, rig, RECIPE.encode(), CHEMISTRY.encode())


@HOSTILE
@given(recipe=damaged(RECIPE))
def test_a_damaged_recipe(recipe: bytes, tmp_path: Path) -> None:
    survives(tmp_path, RIG.encode(), recipe, CHEMISTRY.encode())


@HOSTILE
@given(chemistry=damaged(CHEMISTRY))
def test_a_damaged_chemistry(chemistry: bytes, tmp_path: Path) -> None:
    survives(tmp_path, RIG.encode(), RECIPE.encode(), chemistry)


VALUES = st.sampled_from(
    ["0", "-1", "true", '""', "[]", "{}", '"x"', "1e308", "-0.0", "nan", '"1e11 mL"', '"1e11 bar"', '"1e-17 mm"',
     '"-300 degC"', '"1e12 mL/min"', '"1e-17 mL/min"', '["0 bar", "1e12 bar"]', "2031-01-01", '"1e12 s"', '"1e-18 s"']
)  # fmt: skip


@st.composite
def revalued(draw: st.DrawFn, text: str) -> bytes:
    """An example in which the values of a few keys are other values that are good TOML."""
    lines = text.splitlines()
    places = [i for i, line in enumerate(lines) if re.match(r"[a-z_]+ = ", line)]
    for place in draw(st.lists(st.sampled_from(places), min_size=1, max_size=3)):
        lines[place] = lines[place].partition(" = ")[0] + " = " + draw(VALUES)
    return "\n".join(lines).encode("utf-8")


@HOSTILE
@given(rig=revalued(RIG), recipe=revalued(RECIPE), chemistry=revalued(CHEMISTRY))
def test_strange_values_in_all_files_at_once(rig: bytes, recipe: bytes, chemistry: bytes, tmp_path: Path) -> None:
    survives(tmp_path, rig, recipe, chemistry)


@HOSTILE
@given(rig=revalued(RIG))
def test_strange_values_in_the_rig_alone(rig: bytes, tmp_path: Path) -> None:
    survives(tmp_path, rig, RECIPE.encode(), CHEMISTRY.encode())


@HOSTILE
@given(recipe=revalued(RECIPE))
def test_strange_values_in_the_recipe_alone(recipe: bytes, tmp_path: Path) -> None:
    survives(tmp_path, RIG.encode(), recipe, CHEMISTRY.encode())


@pytest.mark.parametrize("kind", ["rigs", "recipes", "chemistry", "schema"])
def test_any_shipped_file_in_place_of_any_other(kind: str, tmp_path: Path) -> None:
    raw = next(iter(sorted((CONFIGS / kind).iterdir()))).read_bytes()

    survives(tmp_path, raw, RECIPE.encode(), CHEMISTRY.encode())
    survives(tmp_path, RIG.encode(), raw, CHEMISTRY.encode())
    survives(tmp_path, RIG.encode(), RECIPE.encode(), raw)


def test_a_rig_of_a_few_thousand_parts_is_still_read_in_seconds(tmp_path: Path) -> None:
    many = "".join(f'\n[[tees]]\nid = "T{i}"\nvolume = "4 uL"\nrating = "100 bar"\n' for i in range(1000))
    path, _ = write(tmp_path, RIG + many)

    with pytest.raises(ConfigError) as caught:
        load_rig(path)
    assert len(caught.value.problems) == 2000  # each without a line in and without a line out
