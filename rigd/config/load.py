"""Files -> values: reads, checks the structure, checks the meaning, and only then makes a rig or a recipe."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple

from rigd.config.cards import take_cards
from rigd.config.checks.chemistry import check_chemistry
from rigd.config.checks.context import RigContext
from rigd.config.checks.devices import check_devices
from rigd.config.checks.flow import check_flow
from rigd.config.checks.identity import check_identity
from rigd.config.checks.limits import check_limits
from rigd.config.checks.lines import check_lines
from rigd.config.checks.parts import check_parts
from rigd.config.checks.recipe import RecipeContext, check_recipe
from rigd.config.checks.recipe_limits import check_recipe_limits
from rigd.config.checks.references import check_references
from rigd.config.checks.volumes import check_volumes
from rigd.config.chemistry_tables import ChemistryFile
from rigd.config.compile_recipe import compile_recipe
from rigd.config.compile_rig import compile_rig
from rigd.config.digest import digest_of
from rigd.config.files import RecipeFile, RigFile
from rigd.config.findings import Findings
from rigd.config.source import read_source
from rigd.config.structure import declared, read_tables
from rigd.config.sweep import expand
from rigd.logic.flow_path import FlowPath, FlowPathError, flow_path
from rigd.model.chemistry import Chemistry
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem, Severity
from rigd.model.recipe import Point, Recipe
from rigd.model.rig import RigDefinition

FilePath = str | os.PathLike[str]

_KINDS = {"rigd-rig-1": "a rig file", "rigd-recipe-1": "a recipe file", "rigd-chemistry-1": "a chemistry file"}


class Pair(NamedTuple):
    """A rig, the recipe for it if one was asked for, and the warnings about both."""

    rig: RigDefinition
    recipe: Recipe | None
    warnings: tuple[Problem, ...]


@dataclass(frozen=True, slots=True)
class Read:
    """What came of a rig file. ``rig`` is fit for use only when ``problems`` holds no error."""

    rig: RigDefinition
    problems: tuple[Problem, ...]


def load_rig(path: FilePath) -> RigDefinition:
    """The rig that a file and the chemistry file that it names describe.

    Raises ``ConfigError`` with every problem of both files, each sorted by line; warnings alone do not raise (see
    ``load_pair``, which returns them).
    """
    read = read_rig(path)
    _raise_on_error(read.problems)
    return read.rig


def load_recipe(path: FilePath, rig: RigDefinition) -> Recipe:
    """The recipe that a file describes, its points expanded for this rig. Raises ``ConfigError`` like ``load_rig``."""
    recipe, problems = _read_recipe(path, rig)
    _raise_on_error(problems)
    assert recipe is not None
    return recipe


def load_pair(rig_path: FilePath, recipe_path: FilePath | None = None) -> Pair:
    """Rig and recipe together. Raises ``ConfigError`` with every problem of all files, rig first."""
    read = read_rig(rig_path)
    recipe: Recipe | None = None
    problems = read.problems
    if recipe_path is not None:
        recipe, more = _read_recipe(recipe_path, read.rig, rig_is_whole=not _errors(problems))
        problems = (*problems, *more)
    _raise_on_error(problems)
    return Pair(read.rig, recipe, problems)


def read_rig(path: FilePath) -> Read:
    """Like ``load_rig``, but returns the findings, and the rig as far as it could be made."""
    source, unread = read_source(Path(path))
    found = Findings(source, unread)
    if unread or not _right_kind(found, "rigd-rig-1"):
        return Read(_nothing(), found.sorted_by_line)
    file = read_tables(RigFile, source, found)
    chemistry = _chemistry(file, Path(path), found)
    digest = digest_of(file, *chemistry.tables, without=frozenset({"chemistry"})) if not found.failed else ""
    file, digest = take_cards(file, Path(path).parent, digest)
    drafted = compile_rig(file, _chemistry_value(chemistry.tables), found, digest)
    context = RigContext(file, drafted.rig, drafted.sides, chemistry.species, found)
    for check in (check_identity, check_parts, check_lines, check_devices, check_limits, check_flow):
        check(context)
    return Read(drafted.rig, (*found.sorted_by_line, *chemistry.problems))


class _ReadChemistry(NamedTuple):
    """The chemistry file (none when unreadable), the species it declares, and the findings about it."""

    tables: tuple[ChemistryFile, ...] = ()
    species: frozenset[str] = frozenset()
    problems: tuple[Problem, ...] = ()


def _chemistry(file: RigFile, rig_path: Path, found: Findings) -> _ReadChemistry:
    if not file.chemistry:
        return _ReadChemistry()
    path = rig_path.parent / file.chemistry
    source, unread = read_source(path)
    if unread and not source.text and unread[0].code.startswith("file-"):
        message = f"the chemistry file {str(path)!r}: {unread[0].message}"
        found.error(f"chemistry-{unread[0].code}", ("chemistry",), message, "give its path relative to the rig file")
        return _ReadChemistry()
    chemistry_found = Findings(source, unread)
    if unread or not _right_kind(chemistry_found, "rigd-chemistry-1"):
        return _ReadChemistry(problems=chemistry_found.sorted_by_line)
    table = read_tables(ChemistryFile, source, chemistry_found)
    check_chemistry(table, chemistry_found)
    return _ReadChemistry((table,), declared(source, "species"), chemistry_found.sorted_by_line)


def _chemistry_value(tables: tuple[ChemistryFile, ...]) -> Chemistry:
    if not tables:
        return Chemistry("", (), (), "", "")
    (table,) = tables
    return Chemistry(
        name=table.name,
        species=tuple(species.value() for species in table.species),
        reactions=tuple(reaction.value() for reaction in table.reactions),
        reactant=table.reactant,
        product=table.product,
        byproducts=table.byproducts,
        invented=table.invented,
    )


def _read_recipe(
    path: FilePath, rig: RigDefinition, rig_is_whole: bool = True
) -> tuple[Recipe | None, tuple[Problem, ...]]:
    """The recipe (``None`` with errors) and the findings. For half a rig only the structure is checked."""
    source, unread = read_source(Path(path))
    found = Findings(source, unread)
    if unread or not _right_kind(found, "rigd-recipe-1"):
        return None, found.sorted_by_line
    file = read_tables(RecipeFile, source, found)
    if not rig_is_whole:
        return None, found.sorted_by_line
    path_of_rig = _path_of(rig)
    points = _points(file, path_of_rig)
    context = RecipeContext(file, points, rig, path_of_rig, found)
    for check in (check_recipe, check_references, check_recipe_limits, check_volumes):
        check(context)
    if found.failed:
        return None, found.sorted_by_line
    return compile_recipe(file, points, rig, digest_of(file)), found.sorted_by_line


def _path_of(rig: RigDefinition) -> FlowPath | None:
    try:
        return flow_path(rig)
    except FlowPathError:
        return None  # said when the rig was loaded


def _points(file: RecipeFile, path: FlowPath | None) -> tuple[Point, ...]:
    if file.sweep is None or path is None or (file.sweep.residence_time is not None and path.column_mL <= 0):
        return ()
    return expand(file.sweep, path, solvent_only=file.switchover is None)


def _right_kind(found: Findings, wanted: str) -> bool:
    """False, with a finding, when the file says that it is another kind of file."""
    says = found.source.data.get("schema")
    if isinstance(says, str) and says != wanted and says in _KINDS:
        message = f"this is {_KINDS[says]} (schema {says!r}), but {_KINDS[wanted]} is needed"
        found.error("file-kind-wrong", ("schema",), message, "give the files in the right order")
        return False
    return True


def _nothing() -> RigDefinition:
    chemistry = _chemistry_value(())
    empty: tuple[()] = ()
    return RigDefinition("", "", 1, chemistry, *([empty] * 15))  # type: ignore[arg-type]


def _errors(problems: tuple[Problem, ...]) -> bool:
    return any(problem.severity is Severity.ERROR for problem in problems)


def _raise_on_error(problems: tuple[Problem, ...]) -> None:
    if _errors(problems):
        raise ConfigError(problems)
