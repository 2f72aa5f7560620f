"""``rigd ports``: which serial ports there are, and which device answers where."""

from __future__ import annotations

import asyncio
from collections.abc import Sequence
from pathlib import Path

import click

from rigd.console.card_session import Trial, link_of, said
from rigd.console.commands.card import make
from rigd.console.output import Output, json_option

ANSWER_S = 0.5


@click.command()
@click.argument("ports", nargs=-1)
@click.option("--card", "cards", multiple=True, type=click.Path(path_type=Path), help="Ask by this card who is there.")
@click.option("--address", default="", help="Modbus unit, or address on a shared line, that is asked.")
@json_option
@click.pass_obj
def ports(output: Output, ports: tuple[str, ...], cards: tuple[Path, ...], address: str) -> None:
    """List serial ports with names that stay when plugs are changed.

    With --card, each port (or each of PORTS, such as socket://host:port) is asked the card's question of identity, and
    nothing else: no command that could move anything. A card without such a question asks nothing.
    """
    from rigd.adapters.port_list import serial_ports

    found = [{"port": port, "device": port, "what": ""} for port in ports] or serial_ports()
    answers = [asyncio.run(_answers(one["port"], cards, address)) for one in found]
    output.document({"ports": [{**one, "answers": told} for one, told in zip(found, answers, strict=True)]})
    for one, told in zip(found, answers, strict=True):
        what = "; ".join(f"{name}: {answer}" for name, answer in told.items())
        device = f"  ({one['device']}, {one['what']})" if one["what"] else ""
        output.people.print(f"{one['port']}{device}{f'  {what}' if what else ''}", markup=False)
    if not found:
        output.say("no serial ports found; network devices are socket://host:port")


async def _answers(port: str, cards: Sequence[Path], address: str) -> dict[str, str]:
    """Card -> who answered, or why nobody did."""
    return {file.name: await _who(port, file, address) for file in cards}


async def _who(port: str, file: Path, address: str) -> str:
    from rigd.adapters.open_link import open_link
    from rigd.model.errors import RigError
    from rigd.runtime.line import LinkLine

    trial, card = Trial(file, port, address), said(file)
    driver = make(trial)
    identity = card.get("identity", {})
    if card.get("open") or not (identity.get("serial") or identity.get("expect") or identity.get("firmware")):
        return "not asked: the card has no question of identity alone"
    try:
        link = await open_link(link_of(trial, card))
        try:
            who = await driver.identify(LinkLine(link, name=port, timeout_s=ANSWER_S))
        finally:
            await link.close()
    except RigError as error:
        return f"no: {error}"
    return f"{who.maker} {who.model} {who.serial_no} {who.firmware}".strip()
