"""``rigd card``: connect a device from its manual, with a file instead of a program."""

from __future__ import annotations

import asyncio
import sys
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.card_session import Session, Trial
from rigd.console.output import Output, json_option

if TYPE_CHECKING:
    from rigd.ports.driver import Driver

KINDS = tuple(
    f"{protocol}-{family}" for protocol in ("text", "modbus") for family in ("pump", "valve", "chiller", "sensor")
)


@click.group()
def card() -> None:
    """Protocol cards: a TOML file that declares a device as its manual tells it."""


@card.command()
@click.argument("kind", type=click.Choice(KINDS))
@click.argument("file", type=click.Path(path_type=Path))
@click.pass_obj
def new(output: Output, kind: str, file: Path) -> int:
    """Write a commented card of KIND to FILE, to be changed by the manual."""
    text = files("rigd_drivers.card").joinpath("templates", f"{kind}.toml").read_text(encoding="utf-8")
    try:
        with file.open("x", encoding="utf-8") as target:
            target.write(text)
    except FileExistsError:
        raise click.UsageError(f"{file} exists; choose another name, nothing was overwritten") from None
    output.say(f"written: {file}; change it by the manual, then: rigd card check {file}")
    return 0


@card.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option(
    "--transcript", type=click.Path(path_type=Path, exists=True), help="Default: beside FILE, if there is one."
)
@json_option
@click.pass_obj
def check(output: Output, file: Path, transcript: Path | None) -> int:
    """Check FILE: every reply pattern against its sample, channels, orders, and that it says how it stops.

    A transcript that "rigd card try --save" wrote is held against the card: the same bytes must go out, and the same
    values come of the replies. Exit 0: right. 1: other bytes or values. 2: wrong, with line, key and remedy.
    """
    make(Trial(file, ""))
    beside = file.with_suffix(".transcript")
    source = transcript or (beside if beside.exists() else None)
    found = _differences(file, source) if source is not None else []
    output.document({"card": str(file), "right": not found, "transcript": str(source or ""), "differences": found})
    for difference in found:
        output.people.print(f"{source}: {difference}", markup=False)
    if not found:
        output.say(f"{file}: right" + (f", and as in {source}" if source is not None else ""))
    return 1 if found else 0


def _differences(file: Path, source: Path) -> list[str]:
    from rigd.console.card_session import said
    from rigd.runtime.transcript import differences, read_transcript

    transcript = read_transcript(source.read_text(encoding="utf-8"))
    facts = dict(transcript.facts)
    address = facts.pop("address", "")
    facts.pop("card", None)
    driver = make(Trial(file, "", address, parameters=tuple(facts.items())))
    return asyncio.run(differences(driver, transcript, list(said(file)["channels"])))


@card.command("try")
@click.argument("port")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--address", default="", help="Modbus unit, or address on a shared line.")
@click.option(
    "--parameter", "parameters", multiple=True, type=(str, str), help="A parameter of the card and its value."
)
@click.option("--baud", default=0, help="Instead of what the card says.")
@click.option("--order", "orders", multiple=True, type=(str, float), help="An order and its value; moves the device!")
@click.option("--save", type=click.Path(path_type=Path), help="Write the transcript there (must not exist).")
@json_option
@click.pass_obj
def try_card(
    output: Output,
    port: str,
    file: Path,
    address: str,
    parameters: tuple[tuple[str, str], ...],
    baud: int,
    orders: tuple[tuple[str, float], ...],
    save: Path | None,
) -> int:
    """Speak with the device at PORT by the card FILE; show all bytes, in hex and text, with times.

    Asks who is there; on a terminal it then asks what next ("help" tells the words). Elsewhere it prepares the device
    as the daemon does at each start, gives the orders of --order, if any, and reads every channel. The transcript is
    the card's test: rigd card check FILE --transcript SAVED. Exit 0: all was answered; 1: not.
    """
    from rigd.runtime.transcript import Transcript, written

    trial = Trial(file, port, address, baud, parameters)
    driver = make(trial)
    if save is not None and save.exists():
        raise click.UsageError(f"{save} exists; choose another name, nothing was overwritten")
    transcript = Transcript({"card": file.name, "address": address, **dict(parameters)})
    session = Session(output, trial, driver, transcript)
    acts = ["identify", "prepare", *(f"{name} {value:g}" for name, value in orders), "poll"]
    ask = _ask if sys.stdin.isatty() and not output.json and not orders else None
    try:
        good = asyncio.run(session.run(acts if ask is None else acts[:1], ask))
    finally:
        if save is not None:
            save.write_text(written(transcript), encoding="utf-8")
            output.say(f"saved: {save}; hold it against the card with: rigd card check {file} --transcript {save}")
    output.document({"answered": good, "acts": session.readings})
    return 0 if good else 1


def _ask() -> str:
    try:
        return input("card> ")
    except EOFError:
        return "quit"


def make(trial: Trial) -> Driver:
    """The driver of a card; ``ConfigError`` tells what is wrong in it."""
    from rigd.adapters.plugins import driver_family
    from rigd.model.devices import DeviceSpec

    parameters = {name: _number(value) for name, value in trial.parameters}
    options = {"card": str(trial.file), "parameters": parameters}
    spec = DeviceSpec("card", "card", "", "try", trial.address, "", (), options=options, facts={"retries": 0})
    return driver_family("card").make(spec)


def _number(text: str) -> float | str:
    try:
        return float(text)
    except ValueError:
        return text
