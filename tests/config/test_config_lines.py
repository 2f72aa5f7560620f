"""The scanner that finds the line of each key, held against the standard library's reader."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from pathlib import Path as FilePath

import pytest
from fakes.config_files import CONFIGS
from hypothesis import given, settings
from hypothesis import strategies as st

from rigd.config.lines import Path, line_at, lines_of

EXAMPLE = '''title = "x" # comment with [brackets] = and "quotes"
a.b . "c d" = 1

[one]
list = [
  "first",   # ]
  { k = 1, "q]" = 'v }' },
  [1, 2,
   3],
]
text = """
[not.a.table]
key = 1
"""

[[many]]
id = "m0"
[many.sub]
x = 1
[[many]]
id = 'm1'
[[many.inner]]
y = 2
[[many.inner]]
y = 3
'''

EXPECTED: dict[Path, int] = {
    ("title",): 1,
    ("a",): 2,
    ("a", "b"): 2,
    ("a", "b", "c d"): 2,
    ("one",): 4,
    ("one", "list"): 5,
    ("one", "list", 0): 6,
    ("one", "list", 1): 7,
    ("one", "list", 1, "k"): 7,
    ("one", "list", 1, "q]"): 7,
    ("one", "list", 2): 8,
    ("one", "list", 2, 0): 8,
    ("one", "list", 2, 1): 8,
    ("one", "list", 2, 2): 9,
    ("one", "text"): 11,
    ("many",): 16,
    ("many", 0): 16,
    ("many", 0, "id"): 17,
    ("many", 0, "sub"): 18,
    ("many", 0, "sub", "x"): 19,
    ("many", 1): 20,
    ("many", 1, "id"): 21,
    ("many", 1, "inner"): 22,
    ("many", 1, "inner", 0): 22,
    ("many", 1, "inner", 0, "y"): 23,
    ("many", 1, "inner", 1): 24,
    ("many", 1, "inner", 1, "y"): 25,
}


def test_every_key_is_on_its_line() -> None:
    assert dict(lines_of(EXAMPLE)) == EXPECTED


def test_windows_line_ends_count_the_same() -> None:
    assert dict(lines_of(EXAMPLE.replace("\n", "\r\n"))) == EXPECTED


def test_the_nearest_known_place_stands_for_an_unknown_one() -> None:
    found = lines_of(EXAMPLE)

    assert line_at(found, ("many", 1, "missing", "deeper")) == 20
    assert line_at(found, ("nowhere",)) == 0


def paths(value: object, path: Path = ()) -> Iterator[Path]:
    """Every key path of parsed values."""
    items: list[tuple[str | int, object]] = []
    if isinstance(value, dict):
        items = list(value.items())
    elif isinstance(value, list):
        items = list(enumerate(value))
    for step, inner in items:
        yield (*path, step)
        yield from paths(inner, (*path, step))


@pytest.mark.parametrize("file", sorted(CONFIGS.rglob("*.toml")), ids=lambda file: file.name)
def test_example_files_have_a_place_for_everything(file: FilePath) -> None:
    text = file.read_text(encoding="utf-8")
    found, rows = lines_of(text), text.splitlines()
    values = tomllib.loads(text)

    for path in paths(values):
        assert path in found, path
        if isinstance(path[-1], str):
            assert path[-1] in rows[found[path] - 1]


scalars = st.one_of(
    st.integers(-99, 99).map(str),
    st.sampled_from(
        ["true", "1.5e3", "2031-01-01 06:00:00Z", "'it''".replace("''", "'"), "'[#]'", '"a\\"]}"', '"""x\n]"""']
    ),
)
keys = st.sampled_from(["a", "b-1", '"q.k"', "'s k'"])


@st.composite
def toml_values(draw: st.DrawFn, depth: int = 0) -> str:
    """A TOML value as text, with comments and line ends in lists."""
    kind = draw(st.integers(0, 2 if depth < 3 else 0))
    if kind == 0:
        return draw(scalars)
    inner = draw(st.lists(toml_values(depth + 1), max_size=3))
    if kind == 1:
        gap = draw(st.sampled_from(["", "\n", " # [ ' \n"]))
        return "[" + ",".join(gap + item + gap for item in inner) + "]"
    names = draw(st.lists(keys, min_size=len(inner), max_size=len(inner), unique=True))
    return "{ " + ", ".join(f"{name} = {item}" for name, item in zip(names, inner, strict=True)) + " }"


@settings(max_examples=200, deadline=None)
@given(st.lists(toml_values(), min_size=1, max_size=5))
def test_any_nesting_has_a_place_for_every_key(values: list[str]) -> None:
    text = "\n".join(f"k{i} = {value}" for i, value in enumerate(values)) + "\n"
    try:
        parsed = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return  # a multi-line text inside an inline table
    found = lines_of(text)

    assert set(paths(parsed)) == set(found)


def test_nesting_without_end_is_given_up_quietly() -> None:
    assert line_at(lines_of("a = 1\nb = " + "[" * 5000), ("a",)) == 1
