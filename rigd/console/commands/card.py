"""``rigd card`` and ``rigd ports``: connect a device from its manual, with a file instead of a program."""

from __future__ import annotations

import asyncio
import time
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.output import Output, json_option

if TYPE_CHECKING:
    from rigd.ports.driver import Driver
    from rigd.runtime.line import Trace

KINDS = ("modbus-pump", "modbus-valve", "modbus-chiller", "modbus-sensor", "text-pump", "text-chiller")


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
@json_option
@click.pass_obj
def check(output: Output, file: Path) -> int:
    """Check FILE: every reply pattern against its sample, channels, orders, and that it says how it stops.

    Exit 0: right. 2: wrong, with line, key and remedy.
    """
    make(file, "")
    output.document({"card": str(file), "right": True})
    output.say(f"{file}: right")
    return 0


@card.command("try")
@click.argument("port")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--address", default="", help="Modbus unit, or address on a shared line.")
@click.option("--baud", default=9600, show_default=True)
@click.option("--order", "orders", multiple=True, type=(str, float), help="An order and its value; moves the device!")
@click.option("--save", type=click.Path(path_type=Path), help="Write the transcript there (must not exist).")
@click.pass_obj
def try_card(
    output: Output,
    port: str,
    file: Path,
    address: str,
    baud: int,
    orders: tuple[tuple[str, float], ...],
    save: Path | None,
) -> int:
    """Speak with the device at PORT by the card FILE; show all bytes, in hex and text, with times.

    Asks who is there and reads every channel; gives an order only with --order.
    """
    driver = make(file, address)
    heard: list[str] = []
    start_s = time.monotonic()

    def trace(sent: bool, data: bytes) -> None:
        shown = "".join(chr(byte) if 32 <= byte < 127 else "." for byte in data)
        heard.append(f"{(time.monotonic() - start_s) * 1e3:9.1f} ms {'>' if sent else '<'} {data.hex(' ')}  |{shown}|")
        output.people.print(heard[-1], markup=False, highlight=False, soft_wrap=True)

    try:
        asyncio.run(_speak(output, driver, file, (port, baud), orders, trace))
    finally:
        if save is not None:
            with save.open("x", encoding="utf-8") as target:
                target.write("\n".join(heard) + "\n")
    return 0


def make(file: Path, address: str) -> Driver:
    """The driver of a card; ``ConfigError`` tells what is wrong in it."""
    from rigd.adapters.plugins import driver_family
    from rigd.model.devices import DeviceSpec

    options = {"card": str(file)}
    return driver_family("card").make(DeviceSpec("card", "card", "", "try", address, "", (), options=options))


async def _speak(
    output: Output,
    driver: Driver,
    file: Path,
    port: tuple[str, int],
    orders: tuple[tuple[str, float], ...],
    trace: Trace,
) -> None:
    import tomllib

    from rigd.adapters.open_link import open_link
    from rigd.model.devices import LinkSpec
    from rigd.model.orders import Action, Authority, Order
    from rigd.runtime.line import LinkLine

    channels = tuple(tomllib.loads(file.read_bytes().decode())["channels"])  # noqa: ASYNC240 - nothing else runs yet
    link = await open_link(LinkSpec("try", port[0], baud=port[1]))
    try:
        line = LinkLine(link, name=port[0], timeout_s=1.0, trace=trace)
        output.say(str(await driver.identify(line)))
        for number, (name, value) in enumerate(orders):
            await driver.execute(line, Order(number, "card", Action(name), value, Authority.OPERATOR, "try", 0))
        for reading in await driver.poll(line, channels):
            output.say(f"{reading.channel} = {reading.value:g} {reading.fault}")
    finally:
        await link.close()


@click.command()
@json_option
@click.pass_obj
def ports(output: Output) -> None:
    """List serial ports with names that stay when plugs are changed; asks no device anything."""
    from rigd.adapters.port_list import serial_ports

    found = serial_ports()
    output.document({"ports": found})
    for one in found:
        output.say(f"{one['port']}  ({one['device']}, {one['what']})")
    if not found:
        output.say("no serial ports found; network devices are socket://host:port")
