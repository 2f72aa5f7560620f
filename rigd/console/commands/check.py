"""``rigd check``: everything that can be known before anything moves."""

from __future__ import annotations

from pathlib import Path

import click

from rigd.console.output import Output, json_option


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.argument("recipe", type=click.Path(path_type=Path), required=False)
@click.option("--wills", is_flag=True, help="Show the bytes with which the guard stops each device.")
@json_option
@click.pass_obj
def check(output: Output, rig: Path, recipe: Path | None, wills: bool) -> int:
    """Check RIG, and RECIPE for it: units, ratings, volumes, time, liquids, response times, drivers.

    Exit 0: fit to run. 1: not. 2: a file is wrong.
    """
    from rigd.console.check_view import show_check
    from rigd.console.checking import check_files
    from rigd.console.wills_view import wills_table
    from rigd.runtime.wills import last_resorts

    found = check_files(rig, recipe)
    output.document(found.facts())
    if wills:
        output.say(wills_table(found.wills, last_resorts(found.rig)))
    else:
        show_check(output, found)
    return 0 if found.fit else 1
