"""``rigd faults``: the kinds of fault that the simulator can inject."""

from __future__ import annotations

from dataclasses import asdict

import click

from rigd.console.output import Output, json_option


@click.command()
@json_option
@click.pass_obj
def faults(output: Output) -> None:
    """List the faults that the simulator can inject, what they hit and which signals show them.

    What none of your sensors shows, no software will detect.
    """
    from rich import box
    from rich.table import Table

    from rigd.adapters.plugins import simulator_maker

    kinds = simulator_maker().fault_kinds()
    output.document({"faults": [asdict(kind) for kind in kinds]})
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for heading in ("kind", "what happens", "target", "magnitude", "shows in"):
        table.add_column(heading, no_wrap=heading == "kind", overflow="fold")
    for kind in kinds:
        table.add_row(f"[bold]{kind.kind}[/]", kind.title, kind.target, kind.magnitude, kind.signals or "nothing")
    output.say(table)
