"""``rigd runs``: what was run."""

from __future__ import annotations

from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import RUNS


@click.command()
@click.option(
    "--runs", "folder", type=click.Path(path_type=Path), default=RUNS, show_default=True, help="Where to look."
)
@json_option
@click.pass_obj
def runs(output: Output, folder: Path) -> None:
    """List the runs in a folder, oldest first."""
    from rich import box
    from rich.table import Table

    from rigd.adapters.places import run_folders

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
        table.add_row(*names, f"{facts['outcome']}{mark}")
    output.say(table)


def _facts(path: Path) -> dict[str, object]:
    """What the list shows of one run; a journal that cannot be read is listed with the reason."""
    from rigd.adapters.journal_reader import JournalReader
    from rigd.model.errors import JournalError
    from rigd.report.words import duration, simulated, utc

    facts: dict[str, object] = {"run": path.name, "folder": str(path), "rig": "", "recipe": "", "started": ""}
    facts |= {"lasted": "", "duration_s": None, "simulated": False}
    try:
        with JournalReader(path) as journal:
            meta, clock = journal.meta, journal.clock()
    except JournalError as error:
        return facts | {"outcome": f"cannot be read: {error}"}
    end_s = clock[-1][0] / 1e9 if clock else 0.0
    return facts | {
        "rig": meta.get("rig", ""),
        "recipe": meta.get("recipe", ""),
        "started": utc(clock[0][1]) if clock else "",
        "lasted": duration(end_s),
        "duration_s": end_s,
        "simulated": simulated(meta),
        "outcome": meta.get("outcome", "no end recorded"),
    }
