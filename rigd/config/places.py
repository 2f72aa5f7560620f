"""Findings that were made from values name a key alone; here they get the file and the line that a person looks for."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path as FilePath

from rigd.config.files import RecipeFile, RigFile
from rigd.config.findings import item_name
from rigd.config.lines import Path, line_at
from rigd.config.source import Source, read_source
from rigd.model.problems import Problem

_STEP = re.compile(r"([A-Za-z_]+)(?:\[([^\]]+)\])?(?:\.|$)")


def placed(problems: Iterable[Problem], rig: FilePath, recipe: FilePath | None = None) -> tuple[Problem, ...]:
    """Findings with a key like ``vessels[waste].capacity`` or ``settle.volumes`` and no line, with file and line.

    The section decides whose key it is: those of the two files differ. A section that the file leaves out is its first
    line, where it would have to be written.
    """
    files = _Files(rig, recipe)
    return tuple(problem if problem.line or not problem.key else files.place(problem) for problem in problems)


class _Files:
    """The two files, each read at its first finding."""

    def __init__(self, rig: FilePath, recipe: FilePath | None) -> None:
        self._paths: Mapping[str, FilePath | None] = {
            **dict.fromkeys(RecipeFile.model_fields, recipe),
            **dict.fromkeys(RigFile.model_fields, rig),
        }
        self._read: dict[FilePath, Source] = {}

    def place(self, problem: Problem) -> Problem:
        steps = _STEP.findall(problem.key)
        path = self._paths.get(steps[0][0]) if steps else None
        if path is None:
            return problem
        if path not in self._read:
            self._read[path] = read_source(path)[0]
        source = self._read[path]
        return replace(problem, file=source.name, line=line_at(source.lines, _path(source, steps)) or 1)


def _path(source: Source, steps: Iterable[tuple[str, str]]) -> Path:
    path: Path = ()
    for name, item in steps:
        path = (*path, name)
        if item:
            rows = source.value_at(path)
            found = [i for i, row in enumerate(rows) if item_name(row) == item] if isinstance(rows, list) else []
            path = (*path, *found[:1])
    return path
