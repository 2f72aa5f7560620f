"""``rigd sim``: serve the simulated rig."""

from __future__ import annotations

import os
import signal
import sys
import threading
from pathlib import Path

import click

from rigd.console.fault_words import FORM, parse_fault
from rigd.console.output import Output


@click.command()
@click.argument("rig", type=click.Path(path_type=Path))
@click.option(
    "--pace",
    type=click.FloatRange(min=0, min_open=True),
    default=1.0,
    show_default=True,
    help="Process seconds per second.",
)
@click.option("--tcp", is_flag=True, help="Serve on TCP ports instead of pseudo-terminals.")
@click.option("--seed", type=int, default=None, help="Seed of noise and scatter; the rig file's if not given.")
@click.option("--fault", "faults", multiple=True, metavar="FAULT", help=f"Inject a fault: {FORM}. May be repeated.")
@click.option("--quiet", is_flag=True, help="Say nothing but errors.")
@click.option("--with-stdin", is_flag=True, help="End when standard input ends, so with the program that started it.")
@click.pass_obj
def sim(
    output: Output,
    rig: Path,
    pace: float,
    tcp: bool,
    seed: int | None,
    faults: tuple[str, ...],
    quiet: bool,
    with_stdin: bool,
) -> int:
    """Serve the simulated rig of RIG on serial lines until stopped (Ctrl-C).

    rigd run finds the lines by the rig's name when its links have the port "simulated". Use the same --pace there.
    """
    from rigd.adapters.places import rig_folder
    from rigd.adapters.plugins import simulator_maker
    from rigd.config.load import load_rig
    from rigd.ports.plant import SimulatorOptions

    specs = tuple(parse_fault(text) for text in faults)
    definition = load_rig(rig)
    options = SimulatorOptions(
        folder=str(rig_folder(definition.name)),
        pace=pace,
        transport="tcp" if tcp else "pty",
        seed=definition.simulation.seed if seed is None else seed,
        faults=specs,
        quiet=quiet,
    )
    if with_stdin:
        threading.Thread(target=_end_with_stdin, name="stdin", daemon=True).start()
    return simulator_maker().serve(definition, options)


def _end_with_stdin() -> None:
    """Wait for the end of standard input, then end as on SIGTERM."""
    while os.read(sys.stdin.fileno(), 4096):
        pass
    os.kill(os.getpid(), signal.SIGTERM)
