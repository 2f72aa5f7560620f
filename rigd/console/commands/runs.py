"""``rigd runs``: what was run; ``rigd runs verify``: is the record of a run what it was."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import LAST, RUNS, find_run


@click.group(invoke_without_command=True)
@click.option(
    "--runs", "folder", type=click.Path(path_type=Path), default=RUNS, show_default=True, help="Where to look."
)
@json_option
@click.pass_context
def runs(ctx: click.Context, folder: Path) -> None:
    """List the runs in a folder, oldest first."""
    ctx.meta["runs"] = folder
    if ctx.invoked_subcommand is None:
        list_runs(ctx.obj, folder)


@runs.command()
@click.argument("run", default=LAST)
@click.option("--head", default="", metavar="HASH", help="A head of the chain from an alert or a printed page.")
@json_option
@click.pass_context
def verify(ctx: click.Context, run: str, head: str) -> int:
    """Check the journal of RUN (the last one, if not named) against its chain of hashes.

    Exit code 0: whole, or torn off at its end with everything before that true. 1: something was changed, dropped or
    added, or the head given is not in the chain. 2: it cannot be read.
    """
    from rigd.adapters.journal_verify import Finding
    from rigd.adapters.journal_verify import verify as verified

    output: Output = ctx.obj
    folder = find_run(run, ctx.meta["runs"])
    found = verified(folder, head.strip())
    output.document({"run": folder.name, **asdict(found)})
    style = {Finding.INTACT: "green", Finding.TORN: "yellow", Finding.UNSEALED: "yellow"}.get(found.finding, "bold red")
    output.say(f"[{style}]{found.finding}[/] {folder.name}: {found.words or 'every row is as it was written'}")
    for note in found.notes:
        output.say(f"note: {note}")
    output.say(f"{found.records} records seal {found.rows} rows; head of the chain: {found.head}")
    if found.anchor is not None:
        output.say("the head given stands in it" if found.anchor else "[bold red]the head given is not in it[/]: the "
                   "record was cut or written anew after that head went out, or it belongs to another run")  # fmt: skip
    if found.finding is Finding.TAMPERED or found.anchor is False:
        return 1
    return 2 if found.finding in (Finding.DAMAGED, Finding.UNSEALED) else 0


def list_runs(output: Output, folder: Path) -> None:
    """The list, as a table or one JSON document."""
    from rich import box
    from rich.table import Table

    from rigd.adapters.places import run_folders
    from rigd.report.words import OUTCOMES

    found = [_facts(path) for path in run_folders(folder)]
    output.document({"runs": found})
    if not found:
        output.say(f"no runs in {folder}")
        return
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("run", no_wrap=True)
    for heading in ("rig", "recipe", "started (UTC)", "lasted", "outcome"):
        table.add_column(heading, overflow="fold")
    for facts in found:
        mark = " [red]simulated[/]" if facts["simulated"] else ""
        names = [str(facts[key]) for key in ("run", "rig", "recipe", "started", "lasted")]
        table.add_row(*names, f"{OUTCOMES.get(str(facts['outcome']), facts['outcome'])}{mark}")
    output.say(table)


def _facts(path: Path) -> dict[str, object]:
    """What the list shows of one run; a journal that cannot be read is listed with the reason."""
    from rigd.adapters.journal_reader import JournalReader
    from rigd.model.errors import JournalError
    from rigd.report.ending import ending
    from rigd.report.words import duration, simulated, utc

    facts: dict[str, object] = {"run": path.name, "folder": str(path), "rig": "", "recipe": "", "started": ""}
    facts |= {"lasted": "", "duration_s": None, "simulated": False}
    try:
        with JournalReader(path) as journal:
            meta, clock = journal.meta, journal.clock()
    except JournalError as error:
        return facts | {"outcome": f"cannot be read: {error}"}
    end, end_s = ending(path, meta), clock[-1][0] / 1e9 if clock else 0.0
    return facts | {
        "rig": meta.get("rig", ""),
        "recipe": meta.get("recipe", ""),
        "started": utc(clock[0][1]) if clock else "",
        "lasted": duration(end_s),
        "duration_s": end_s,
        "simulated": simulated(meta),
        "outcome": end.outcome,
        "text": end.text,
    }
