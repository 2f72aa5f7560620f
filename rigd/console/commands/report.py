"""``rigd report``: the report of a run, in the terminal and as one HTML file."""

from __future__ import annotations

import webbrowser
from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.console.run_names import LAST, find_run


@click.command()
@click.argument("run", default=LAST)
@click.option("--open", "show", is_flag=True, help="Open the page in the browser.")
@click.option(
    "--out", type=click.Path(path_type=Path, dir_okay=False), help="Where the page goes; the run folder if not given."
)
@json_option
@click.pass_obj
def report(output: Output, run: str, show: bool, out: Path | None) -> None:
    """Write the report of RUN (its folder, its name, or the last one)."""
    from rigd.report.facts import report_facts
    from rigd.report.open_run import open_run
    from rigd.report.page import write_page
    from rigd.report.summary import summary

    data = open_run(find_run(run))
    path = write_page(data, out)
    output.document({**report_facts(data), "report": str(path)})
    output.say(summary(data))
    output.say(f"report: {path}")
    if show:
        webbrowser.open(path.resolve().as_uri())
