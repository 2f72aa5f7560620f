"""Collects what is wrong in one file, each finding with its file, line and key."""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches

from rigd.config.lines import Path, line_at
from rigd.config.source import Source
from rigd.model.problems import Problem, Severity


class Findings:
    """The findings about one source, in the order they were made; ``sorted_by_line`` is for people."""

    def __init__(self, source: Source, problems: Iterable[Problem] = ()) -> None:
        self.source = source
        self.problems: list[Problem] = list(problems)
        self._seen: set[Problem] = set()

    def error(self, code: str, path: Path, message: str, remedy: str) -> None:
        """Something that forbids a run."""
        self._add(code, path, message, remedy, Severity.ERROR)

    def warning(self, code: str, path: Path, message: str, remedy: str) -> None:
        """Something a person should know before a run."""
        self._add(code, path, message, remedy, Severity.WARNING)

    def _add(self, code: str, path: Path, message: str, remedy: str, severity: Severity) -> None:
        line = line_at(self.source.lines, path) or (1 if self.source.text else 0)
        problem = Problem(code, message, remedy, severity, self.source.name, line, key_text(self.source, path))
        if problem not in self._seen:
            self._seen.add(problem)
            self.problems.append(problem)

    @property
    def failed(self) -> bool:
        """True when a finding forbids a run."""
        return any(problem.severity is Severity.ERROR for problem in self.problems)

    @property
    def sorted_by_line(self) -> tuple[Problem, ...]:
        """All of them, top of the file first."""
        return tuple(sorted(self.problems, key=lambda problem: (problem.line, problem.key, problem.code)))


def key_text(source: Source, path: Path) -> str:
    """A path as people read it: ``pumps[PU-A].bore``; items without an id count from 1: ``trip_when[2]``."""
    text = ""
    for depth, step in enumerate(path):
        if isinstance(step, int):
            name = item_name(source.value_at(path[: depth + 1])) if depth == 1 else ""
            text += f"[{name or step + 1}]"
        else:
            text += f".{step}" if text else step
    return text


def item_name(item: object) -> str:
    """What a list calls one of its tables: its id, tag or name, "" when it has none fit to be shown."""
    if isinstance(item, dict):
        for key in ("id", "tag", "name"):
            name = item.get(key)
            if isinstance(name, str) and name.isprintable() and 0 < len(name) <= 40:
                return name
    return ""


def nearest(name: str, known: Iterable[str]) -> str:
    """``"; did you mean 'x'?"`` for the known name most like ``name``, or "" when none is like it."""
    names = list(known)
    folded = {candidate.lower(): candidate for candidate in names}
    near = get_close_matches(name.lower()[:60], folded, n=1, cutoff=0.55)
    return f"; did you mean {folded[near[0]]!r}?" if near else ""


def listed(names: Iterable[str]) -> str:
    """Names for a sentence, in order; ``"none"`` for none."""
    return ", ".join(names) or "none"
