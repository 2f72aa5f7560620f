"""``rigd export``: the data of a run as tables."""

from __future__ import annotations

from pathlib import Path

import click

from rigd.console.output import Output, json_option
from rigd.model.units import UnitError, parse_quantity


@click.command()
@click.argument("run", type=click.Path(path_type=Path))
@click.option("--csv", "as_csv", is_flag=True, help="Comma-separated values (the default).")
@click.option("--parquet", is_flag=True, help="Parquet files with every sample, exactly; needs rigd[parquet].")
@click.option(
    "--out", type=click.Path(path_type=Path, file_okay=False), help="Folder to write to; the run's own if not given."
)
@click.option("--every", default="1 s", show_default=True, metavar="TIME", help="One row per this much process time.")
@json_option
@click.pass_obj
def export(output: Output, run: Path, as_csv: bool, parquet: bool, out: Path | None, every: str) -> None:
    """Write the samples and the events of RUN (its folder) as two tables that a spreadsheet or a notebook opens."""
    from rigd.adapters.journal_export import events_csv, export_csv
    from rigd.adapters.whole_file import whole_files
    from rigd.console.run_names import find_run

    if as_csv and parquet:
        raise click.UsageError("--csv and --parquet: one of them")
    try:
        period_s = parse_quantity(every, "time")
    except UnitError as error:
        raise click.UsageError(f"--every: {error}") from error
    if period_s <= 0:
        raise click.UsageError("--every: must be above zero")
    folder = find_run(run)
    target = out or folder
    kind = "parquet" if parquet else "csv"
    samples, events = target / f"samples.{kind}", target / f"events.{kind}"
    if parquet:
        from rigd.adapters.parquet_export import export_parquet

        rows, happened = export_parquet(folder, target)
    else:
        with whole_files(samples, events) as (table, told):
            rows, happened = export_csv(folder, table, period_s), events_csv(folder, told)
    output.document(
        {"samples": {"path": str(samples), "rows": rows}, "events": {"path": str(events), "rows": happened}}
    )
    output.say(f"{rows} rows in {samples}\n{happened} events in {events}")
