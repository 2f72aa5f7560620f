"""Example files with one thing changed, for the tests of the loader."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from rigd.config import load_pair, read_rig
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem, Severity

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


@dataclass(frozen=True)
class Row:
    """A finding and what provokes it: edits of the example rig, or blocks added before ``[simulation]``.

    ``on_line`` must stand on the line of the finding; ``also`` are codes of other findings that cannot be avoided.
    """

    code: str
    key: str
    on_line: str
    edits: tuple[Edit, ...] = ()
    add: str = ""
    also: tuple[str, ...] = ()
    warning: bool = False

    def rig(self) -> str:
        """The rig file with this fault."""
        return edited(RIG, *self.edits, ("[simulation]", f"{self.add}[simulation]"))

    def check(self, folder: Path) -> None:
        """Exactly this is said: no more, no less, and at the right place."""
        problems = rig_problems_of(folder, self.rig())
        told = sorted(problem.code for problem in problems)
        assert told == sorted((self.code, *self.also)), [str(problem) for problem in problems]
        found = [problem for problem in problems if (problem.code, problem.key) == (self.code, self.key)]
        assert found, [(problem.code, problem.key) for problem in problems]
        assert self.on_line in self.rig().splitlines()[found[0].line - 1]
        assert found[0].file == str(folder / "rigs/rig.toml")
        assert found[0].message
        assert found[0].remedy
        assert (found[0].severity is Severity.WARNING) == self.warning


def without(*names: str) -> tuple[Edit, ...]:
    """Edits of the example rig that remove whole tables."""
    return tuple((block(RIG, name), "") for name in names)


def within(name: str, old: str, new: str) -> tuple[Edit, ...]:
    """An edit inside one table of the example rig only."""
    whole = block(RIG, name)
    return ((whole, edited(whole, (old, new))),)
