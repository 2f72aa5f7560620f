"""Where output goes: people's text, or exactly one JSON document on stdout with people's text on stderr."""

from __future__ import annotations

import sys
from collections.abc import Callable
from functools import cached_property
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from rich.console import Console

Command = TypeVar("Command", bound=Callable[..., Any])

PIPED_WIDTH = 110
"""Columns when the output is not a terminal."""


class Output:
    """One per command line; handed to commands as click's ``obj``."""

    def __init__(self) -> None:
        self.json = False
        self.json_written = False

    @cached_property
    def people(self) -> Console:
        """For people: stdout, or stderr when a program reads stdout."""
        return _console(self.json)

    @cached_property
    def errors(self) -> Console:
        """For what went wrong: always stderr."""
        return _console(True)

    def say(self, *things: object) -> None:
        """Print for people; accepts rich markup and renderables."""
        self.people.print(*things)

    def document(self, facts: object) -> None:
        """With ``--json``: print the one document; otherwise nothing."""
        if not self.json:
            return
        import json

        assert not self.json_written, "a command prints one JSON document only"
        self.json_written = True
        sys.stdout.write(json.dumps(plain(facts), indent=1, ensure_ascii=False, allow_nan=False) + "\n")
        sys.stdout.flush()


def json_option(command: Command) -> Command:
    """Adds ``--json`` to a command."""

    def remember(ctx: click.Context, _: click.Parameter, value: bool) -> None:
        output = ctx.find_root().obj
        if isinstance(output, Output):
            output.json = value

    text = "Print one JSON document on stdout and nothing else there."
    return click.option("--json", is_flag=True, expose_value=False, is_eager=True, callback=remember, help=text)(
        command
    )


def plain(facts: Any) -> Any:
    """Values as JSON has them: tuples as lists, enums by value, NaN and infinity as null."""
    if isinstance(facts, dict):
        return {str(key): plain(value) for key, value in facts.items()}
    if isinstance(facts, list | tuple | set | frozenset):
        return [plain(value) for value in facts]
    if isinstance(facts, float):
        return facts if facts - facts == 0 else None
    return facts


def _console(to_stderr: bool) -> Console:
    from rich.console import Console

    stream = sys.stderr if to_stderr else sys.stdout
    return Console(stderr=to_stderr, highlight=False, width=None if stream.isatty() else PIPED_WIDTH, emoji=False)
