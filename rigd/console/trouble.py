"""What went wrong, for people: file problems with line and caret, one sentence for the rest, never a traceback."""

from __future__ import annotations

import errno
import os
import re
import tempfile
import traceback
from collections.abc import Sequence
from pathlib import Path

import click
from rich.console import Console, Group
from rich.text import Text

from rigd.console.output import Output
from rigd.model.errors import ConfigError, JournalError, PluginError, RigError
from rigd.model.problems import Problem, Severity

STYLES = {Severity.ERROR: "bold red", Severity.WARNING: "bold yellow", Severity.NOTE: "bold cyan"}

EXIT_NOT_DONE, EXIT_WRONG_INPUT, EXIT_OWN_FAULT = 1, 2, 3

_DISK = (errno.ENOSPC, errno.EDQUOT, errno.EROFS, errno.EFBIG, errno.EIO)
"""Those that tell enough without a name of a file."""
STORAGE = {
    errno.ENOSPC: "free some space on the disk",
    errno.EDQUOT: "free some space within your quota",
    errno.EROFS: "choose a folder that is not read-only (--out)",
    errno.EACCES: "choose a folder that you may write in (--out)",
    errno.EPERM: "choose a folder that you may write in (--out)",
    errno.EFBIG: "the limit on the size of files is too low (ulimit -f)",
    errno.ENOENT: "make its folder first",
    errno.ENOTDIR: "a part of its path is a file and no folder",
    errno.EISDIR: "it is a folder: name a file",
    errno.EEXIST: "there is a file where a folder should be",
    errno.ENAMETOOLONG: "choose a shorter name",
    errno.EIO: "the disk failed: save what is on it",
}
"""What to do when a file cannot be opened or written: no fault of the program's."""


def explain(error: Exception, output: Output) -> int:
    """Print what happened, on stderr (and as JSON if asked for); returns the exit code."""
    if isinstance(error, ConfigError):
        print_problems(output.errors, error.problems)
        _json_error(output, str(error), error.problems)
        return EXIT_WRONG_INPUT
    if isinstance(error, click.ClickException):
        _usage(output.errors, error)
        _json_error(output, error.format_message())
        return EXIT_WRONG_INPUT
    if isinstance(error, RigError):
        _sentence(output.errors, str(error))
        _json_error(output, str(error))
        return EXIT_WRONG_INPUT if isinstance(error, PluginError | JournalError) else EXIT_NOT_DONE
    if isinstance(error, OSError) and error.errno in STORAGE and (error.filename or error.errno in _DISK):
        where = f"{error.filename}: " if error.filename else ""
        found = "nothing could be written there" if error.errno in _DISK else "it cannot be opened"
        text = f"{where}{found} ({error.strerror}); {STORAGE[error.errno]}, then try again."
        _sentence(output.errors, text)
        _json_error(output, text)
        return EXIT_WRONG_INPUT
    place = _write_details(error)
    reason = " ".join(str(error).split()) or "no reason given"
    text = f"rigd itself failed ({type(error).__name__}: {reason}). Details for a bug report are in {place}."
    _sentence(output.errors, text)
    _json_error(output, text)
    return EXIT_OWN_FAULT


def problem_block(problem: Problem) -> Group:
    """One problem as lines: where; the source line with a caret; what was found and is allowed; what to do."""
    place = f"{problem.file}:{problem.line}" if problem.line else problem.file
    head = Text(no_wrap=True, overflow="ignore")  # an editor's link must stay whole
    head.append(problem.severity.value, STYLES[problem.severity]).append(f"  {place}", "bold")
    if problem.key:
        head.append(f"  {problem.key}", "cyan")
    lines = [head, *_source_lines(problem), Text(f"  {problem.message}")]
    if problem.remedy:
        lines.append(Text.assemble(("  do: ", "green"), problem.remedy))
    return Group(*lines)


def print_problems(console: Console, problems: Sequence[Problem]) -> None:
    """All problems, an empty line between, and how many there are."""
    for problem in problems:
        console.print(problem_block(problem), crop=False)
        console.print()
    errors = sum(problem.severity is Severity.ERROR for problem in problems)
    others = len(problems) - errors
    parts = [_count(errors, "error"), _count(others, "warning or note", "warnings and notes")]
    console.print(Text(", ".join(part for part in parts if part), style="bold"))


def _count(number: int, one: str, many: str = "") -> str:
    return f"{number} {one if number == 1 else many or one + 's'}" if number else ""


def _source_lines(problem: Problem) -> list[Text]:
    """The line of the file and a caret under the value, or nothing when the file cannot be shown."""
    if not problem.line or not problem.file:
        return []
    try:
        lines = Path(problem.file).read_text(encoding="utf-8").splitlines()
        line = lines[problem.line - 1]
    except (OSError, ValueError, IndexError):
        return []
    start, end = _span(line, problem.key)
    number = str(problem.line)
    shown = Text(f"  {number} | {line}", style="default", no_wrap=True, overflow="ellipsis")
    caret = Text(f"  {' ' * len(number)} | {' ' * start}{'^' * max(end - start, 1)}", style="red", no_wrap=True)
    return [shown, caret]


def _span(line: str, key: str) -> tuple[int, int]:
    """Columns of the value that a problem is about: after ``last part of key =``; the text of the line otherwise.

    A list of inline tables on one line holds the key several times; the number before the last part says which one.
    """
    name = re.sub(r"\[[^\]]*\]$", "", key).rsplit(".", 1)[-1] if key else ""
    pattern = rf"(?:^|[\s{{,]){re.escape(name)}\s*=\s*(\"[^\"]*\"|'[^']*'|\[[^\]]*\]|\{{[^}}]*\}}|[^,#}}]+)"
    number = re.search(r"\[(\d+)\]\.[^.\[\]]+$", key)
    places = list(re.finditer(pattern, line)) if name else []
    if places:
        found = places[min(int(number[1]) - 1 if number else 0, len(places) - 1)]
        value = found[1].rstrip()
        return found.start(1), found.start(1) + len(value)
    body = line.split("#")[0].rstrip()
    return len(line) - len(line.lstrip()), max(len(body), 1)


def _sentence(console: Console, text: str) -> None:
    console.print(Text.assemble(("rigd: ", "bold red"), text))


def _usage(console: Console, error: click.ClickException) -> None:
    message = error.format_message()
    if isinstance(error, click.NoSuchOption):
        near = error.possibilities
        message = f"there is no option {error.option_name}." + (f" Did you mean {' or '.join(near)}?" if near else "")
    _sentence(console, message)
    context = getattr(error, "ctx", None)
    path = context.command_path if context is not None else "rigd"
    console.print(Text(f"Help: {path} --help", style="dim"))


def _json_error(output: Output, text: str, problems: Sequence[Problem] = ()) -> None:
    if not output.json_written:
        output.document(
            {"outcome": "refused", "fit": False, "error": text, "problems": [problem_facts(p) for p in problems]}
        )


def problem_facts(problem: Problem) -> dict[str, object]:
    """A problem for programs."""
    return {
        "code": problem.code,
        "severity": problem.severity.value,
        "where": problem.where,
        "file": problem.file,
        "line": problem.line,
        "key": problem.key,
        "message": problem.message,
        "remedy": problem.remedy,
    }


def _write_details(error: Exception) -> str:
    """Traceback into a file of the user's own; returns its path, or says that it could not be written."""
    text = "".join(traceback.format_exception(error))
    try:
        handle, path = tempfile.mkstemp(prefix="rigd-failure-", suffix=".txt")
        with os.fdopen(handle, "w", encoding="utf-8") as file:
            file.write(text)
    except OSError:
        return "no file, because the temporary folder cannot be written"
    return path
