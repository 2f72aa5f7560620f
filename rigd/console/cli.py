"""The ``rigd`` command: names, help and errors. Each command's module is imported when it is called, not before.

House rule: importing this file costs click and the standard library only; ``rigd --help`` must stay under 150 ms.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from difflib import get_close_matches
from importlib import import_module

import click

from rigd import __version__
from rigd.console.output import Output

_HERE = "rigd.console.commands."

SECTIONS: dict[str, dict[str, tuple[str, str]]] = {
    "Before a run": {
        "check": ("check:check", "Everything that can be known before anything moves."),
        "dry-run": ("dry_run:dry_run", "Rehearse a recipe on the simulated rig, in virtual time."),
        "nights": ("nights:nights", "Rehearse many nights with uncertain numbers; what matters most."),
        "prove": ("prove:prove", "Every fault in every phase, judged by the true simulated plant."),
        "sim": ("simulate:sim", "Serve the simulated rig on serial lines, for rigd run."),
        "permit": ("permit:permit", "May a rig run unattended? Door sign and shutdown card."),
        "proof": ("permit:proof", "Record or list proof tests of interlocks."),
        "calibrate": ("calibrate:calibrate", "Pumps by weighing, sensors, segments by tracer; the run uses it."),
        "alert-test": ("permit:alert_test", "Send a test alert; record that it was received."),
        "faults": ("faults:faults", "List the faults that the simulator can inject."),
        "card": ("card:card", "Connect a device from its manual: write, check, try a card."),
        "driver": ("driver:driver", "Begin a driver package of your own; list those installed."),
        "ports": ("ports:ports", "List serial ports with stable names; what answers where."),
        "schema": ("schema:schema", "Print the JSON Schema of a rig, recipe or card file."),
    },
    "A run": {
        "run": ("run:run", "Run a recipe on a rig."),
        "demo": ("demo:demo", "A short sweep on the simulated rig, live, then its report."),
    },
    "While it runs": {
        "watch": ("watch:watch", "See a running rig; leaving does not touch it."),
        "hold": ("requests:hold", "Wait safely, ready to go on."),
        "resume": ("requests:resume", "Go on after a hold."),
        "stop": ("requests:stop", "Reagents off, flush with solvent, then rest."),
        "cut": ("requests:cut", "Stop everything at once."),
        "acknowledge": ("requests:acknowledge", "Say that an alarm was seen."),
        "reset": ("requests:reset", "Reset interlocks whose cause is gone; starts nothing."),
        "shelve": ("requests:shelve", "Hide an alarm for a stated time and reason."),
        "unshelve": ("requests:unshelve", "Show a shelved alarm again."),
        "out-of-service": ("requests:out_of_service", "Hide an alarm for maintenance, or return it."),
        "bypass": ("requests:bypass", "Bypass one interlock for a stated time and reason."),
        "confirm": ("requests:confirm", "Sign a checklist item or answer a prompt."),
        "fault": ("fault:fault", "Inject, clear or list faults in a running simulator."),
    },
    "Afterwards": {
        "runs": ("runs:runs", "List what was run."),
        "report": ("report:report", "Write the report of a run."),
        "export": ("export:export", "Write the data of a run as tables."),
        "replay": ("replay:replay", "Decide a run again from its journal; play it back; ask what if."),
    },
}

COMMANDS = {name: place for section in SECTIONS.values() for name, place in section.items()}


class LazyGroup(click.Group):
    """Knows the commands by name and one line of help; imports the module of the one that is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names in the order of the help."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import and return a command; ``None`` for an unknown name."""
        if cmd_name not in COMMANDS:
            return None
        module, _, attribute = COMMANDS[cmd_name][0].partition(":")
        command = getattr(import_module(_HERE + module), attribute)
        assert isinstance(command, click.Command)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """As click's, with the nearest known command in the error."""
        if args and not args[0].startswith("-") and args[0] not in COMMANDS:
            raise click.UsageError(f"there is no command {args[0]!r}.{_nearest(args[0])}", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The commands under their headings, from the table alone."""
        for heading, commands in SECTIONS.items():
            with formatter.section(heading):
                formatter.write_dl([(name, line) for name, (_, line) in commands.items()], col_max=14)


def _nearest(name: str) -> str:
    known = [command for command in COMMANDS if command.startswith(name.lower())]
    known = known or get_close_matches(name.lower(), COMMANDS, n=2, cutoff=0.5)
    return f" Did you mean {' or '.join(repr(command) for command in known)}?" if known else ""


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, message="rigd %(version)s")
def rigd() -> None:
    """Runs a flow chemistry rig, stops it when it must, and turns the run into a decision.

    Not a safety function: read the cautions in README.md before you trust it near chemicals.
    """


def main() -> None:
    """Entry point of the ``rigd`` command."""
    sys.exit(call(sys.argv[1:]))


def call(arguments: Sequence[str]) -> int:
    """Run one command line and return its exit code: 0 done, 1 not, 2 the files or words given are wrong, 3 a fault of
    the program itself. Never raises and never shows a traceback."""
    output = Output()
    try:
        code = rigd.main(args=list(arguments) or ["--help"], prog_name="rigd", standalone_mode=False, obj=output)
        return code if isinstance(code, int) else 0
    except click.exceptions.Exit as leaving:
        return leaving.exit_code
    except (click.Abort, KeyboardInterrupt):
        return _interrupted(arguments)
    except BrokenPipeError:
        return _reader_went_away()
    except Exception as error:  # noqa: BLE001 - the last net: a person gets a sentence, whatever it was
        from rigd.console.trouble import explain

        return explain(error, output)


def _interrupted(arguments: Sequence[str]) -> int:
    """Ctrl-C before a command was done. A run that has begun is another program and hears of it by itself."""
    if list(arguments[:1]) == ["run"]:
        print("rigd: interrupted before the run began: nothing was sent to the rig, nothing moved", file=sys.stderr)
        return 1
    print(f"rigd: {' '.join(arguments[:1])} was interrupted", file=sys.stderr)
    return 130


def _reader_went_away() -> int:
    """The other end of a pipe closed (``rigd runs | head``): no error, and nothing more to flush."""
    import os

    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    return 0
