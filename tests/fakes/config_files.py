"""Example files with one thing changed, for the tests of the loader."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from rigd.config import load_pair, read_rig
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem

CONFIGS = Path(__file__).parents[2] / "configs"
RIG = (CONFIGS / "rigs/two-pump-column.toml").read_text(encoding="utf-8")
SINGLE = (CONFIGS / "rigs/two-pump-single.toml").read_text(encoding="utf-8")
THREE = (CONFIGS / "rigs/three-pump-two-columns.toml").read_text(encoding="utf-8")
RECIPE = (CONFIGS / "recipes/demo-sweep.toml").read_text(encoding="utf-8")
CHEMISTRY = (CONFIGS / "chemistry/esterification.toml").read_text(encoding="utf-8")

Edit = tuple[str, str]


def edited(text: str, *edits: Edit) -> str:
    """Each edit replaces a text that must be there exactly once."""
    for old, new in edits:
        assert text.count(old) == 1, f"{text.count(old)} times: {old!r}"
        text = text.replace(old, new)
    return text


def block(text: str, name: str) -> str:
    """The whole table ``[[...]]`` or ``[...]`` whose id or tag is ``name``, with its blank line."""
    found = [part for part in text.split("\n\n") if f'\nid = "{name}"\n' in part or f'\ntag = "{name}"\n' in part]
    assert len(found) == 1, name
    return found[0] + "\n\n"


def write(folder: Path, rig: str = RIG, recipe: str = RECIPE, chemistry: str = CHEMISTRY) -> tuple[Path, Path]:
    """Rig, recipe and chemistry in a folder of their own; returns the first two paths."""
    paths = folder / "rigs/rig.toml", folder / "recipes/recipe.toml", folder / "chemistry/esterification.toml"
    for path, text in zip(paths, (rig, recipe, chemistry), strict=True):
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, encoding="utf-8")
    return paths[0], paths[1]


def problems_of(folder: Path, rig: str = RIG, recipe: str = RECIPE, chemistry: str = CHEMISTRY) -> Sequence[Problem]:
    """Everything that is said about these three files, warnings included."""
    rig_path, recipe_path = write(folder, rig, recipe, chemistry)
    try:
        return load_pair(rig_path, recipe_path).warnings
    except ConfigError as error:
        return error.problems


def rig_problems_of(folder: Path, rig: str, chemistry: str = CHEMISTRY) -> Sequence[Problem]:
    """Everything that is said about a rig and its chemistry."""
    return read_rig(write(folder, rig, chemistry=chemistry)[0]).problems
