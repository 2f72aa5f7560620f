"""``rigd nights``: rehearse many nights with numbers that nobody knows exactly."""

from __future__ import annotations

import contextlib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from rigd.console.output import Output, json_option

FOLDER = click.Path(path_type=Path, file_okay=False)

if TYPE_CHECKING:
    from rigd.config.varied import Nights
    from rigd.nights.store import NightStore


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--out", type=FOLDER, help="Folder of results; nights/NAME if not given.")
@click.option("--workers", type=click.IntRange(min=1), default=None, help="Processes; one for each core if not given.")
@click.option("--cluster", metavar="ADDRESS", help="Use the dask cluster whose scheduler is there.")
@json_option
@click.pass_obj
def nights(output: Output, file: Path, out: Path | None, workers: int | None, cluster: str | None) -> int:
    """Rehearse many nights: FILE says which numbers of rig, chemistry, recipe and faults vary, and how.

    An interrupt keeps what is done; the same command goes on from there. Exit 0: all nights rehearsed. 1: not all.
    2: a file is wrong.
    """
    from rigd.config.varied import read_nights
    from rigd.nights.campaign import count_of, digest_of, jobs_of, on_cluster, on_this_machine
    from rigd.nights.probe import check
    from rigd.nights.store import NightStore

    plan = read_nights(file)
    units = check(plan)
    store = NightStore(out or Path("nights") / plan.name, plan.name, digest_of(plan))
    jobs = [job for job in jobs_of(plan) if job.night not in store.rows]
    if store.rows:
        output.say(f"{len(store.rows)} nights are kept from before; {len(jobs)} to go")
    rows = on_cluster(jobs, cluster) if cluster else on_this_machine(jobs, workers or 0)
    interrupted = False
    with _progress(output, count_of(plan), len(store.rows)) as step:
        try:
            for row in rows:
                store.add(row)
                step()
        except KeyboardInterrupt:
            interrupted = True
            rows.close()  # type: ignore[attr-defined]
    _report(output, plan, store, units)
    if interrupted:
        output.say(f"interrupted; {len(store.rows)} nights are kept. The same command goes on from here.")
    return 0 if len(store.rows) == count_of(plan) else 1


@contextlib.contextmanager
def _progress(output: Output, total: int, done: int) -> Iterator[Callable[[], None]]:
    """A bar with the time left, on a terminal only."""
    if not output.errors.is_terminal:
        yield lambda: None
        return
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("nights"), BarColumn(), MofNCompleteColumn(), TextColumn("left"), TimeRemainingColumn())
    with Progress(*columns, console=output.errors, transient=True) as bar:
        task = bar.add_task("nights", total=total, completed=done)
        yield lambda: bar.advance(task)


def _report(output: Output, plan: Nights, store: NightStore, units: dict[str, str]) -> None:
    from rigd.console.nights_view import table, told
    from rigd.model.errors import RigError
    from rigd.nights.campaign import count_of
    from rigd.nights.summary import summarise
    from rigd.report.nights_page import write_nights_page

    rows = store.in_order()
    facts: dict[str, Any] = told(summarise(plan.name, plan.design, count_of(plan), rows, units))
    output.document({**facts, "digests": {str(row["night"]): row.get("digest", "") for row in rows}})
    if not rows:
        return
    output.say(table(facts))
    for words, number in facts["ends"]:
        output.say(f"{number} {words}")
    output.say(f"[bold]{facts['chance']}[/]")
    output.say("[dim]SIMULATED: the interval holds for this model and these ranges only.[/]")
    try:
        output.say(f"data: {store.write_table()}")
    except RigError as error:
        output.say(str(error))
    output.say(f"report: {write_nights_page(store.folder / 'nights.html', facts, rows)}")
