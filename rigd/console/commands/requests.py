"""What a person may ask of a running rig, through the daemon's door: hold, resume, stop, cut, reset and the like."""

from __future__ import annotations

import asyncio
import getpass
from collections.abc import Callable, Mapping
from typing import Any

import click

from rigd.adapters.door_client import SocketDoor, find_daemon
from rigd.console.output import Output, json_option
from rigd.model.orders import Verb
from rigd.model.units import UnitError, parse_quantity


def _common(command: Callable[..., Any]) -> Callable[..., Any]:
    """Options that every request has."""
    command = json_option(click.pass_obj(command))
    command = click.option("--as", "who", default="", metavar="NAME", help="Who asks; default: your login.")(command)
    return click.option("--run", "name", default="", metavar="NAME", help="Which, when several runs go on.")(command)


def _ask(
    output: Output, verb: Verb, name: str, who: str, target: str = "", args: Mapping[str, str | float] | None = None
) -> None:
    """Send the request and print the answer; a refusal is a ``DoorError`` with the daemon's reason."""
    daemon = find_daemon(name)
    who = who or getpass.getuser()
    detail = asyncio.run(SocketDoor(daemon.door).request(verb.value, who, target, args))
    output.document({"verb": verb.value, "target": target, "run": daemon.run, "ok": True, "detail": detail})
    output.say(f"[green]{verb.value}[/] {target}".rstrip() + f": {detail or 'accepted'} [dim]({daemon.run})[/]")


@click.command()
@_common
def hold(output: Output, name: str, who: str) -> None:
    """Wait safely, ready to go on.

    The rig keeps its temperature and stops or idles its pumps as the present phase allows. Go on with: rigd resume
    """
    _ask(output, Verb.HOLD, name, who)


@click.command()
@_common
def resume(output: Output, name: str, who: str) -> None:
    """Go on after a hold; the point that was interrupted settles anew."""
    _ask(output, Verb.RESUME, name, who)


@click.command()
@_common
def stop(output: Output, name: str, who: str) -> None:
    """Reagents off, flush with solvent while cooling, then rest. Ends the run."""
    _ask(output, Verb.STOP, name, who)


@click.command()
@_common
def cut(output: Output, name: str, who: str) -> None:
    """Stop everything at once. Ends the run.

    This is a request to software. If it is not obeyed at once, use the hard-wired switch.
    """
    _ask(output, Verb.CUT, name, who)


@click.command()
@click.argument("interlock", default="*")
@_common
def reset(output: Output, interlock: str, name: str, who: str) -> None:
    """Reset INTERLOCK (all, if not named) when its cause is gone. Starts nothing."""
    _ask(output, Verb.RESET, name, who, interlock)


@click.command()
@click.argument("alarm", default="*")
@_common
def acknowledge(output: Output, alarm: str, name: str, who: str) -> None:
    """Say that ALARM (all, if not named) was seen. Changes nothing on the rig."""
    _ask(output, Verb.ACKNOWLEDGE, name, who, alarm)


@click.command()
@click.argument("item")
@_common
def confirm(output: Output, item: str, name: str, who: str) -> None:
    """Sign checklist ITEM, or answer the prompt of that name ("*": all that wait)."""
    _ask(output, Verb.CONFIRM, name, who, item)


@click.command()
@click.argument("interlock")
@click.option("--reason", default="", help="Why, and what watches instead. Needed.")
@click.option("--for", "duration", default="", metavar="TIME", help='How long, with its unit: "10 min". Needed.')
@click.option("--end", is_flag=True, help="End the bypass now.")
@_common
def bypass(output: Output, interlock: str, reason: str, duration: str, end: bool, name: str, who: str) -> None:
    """Bypass INTERLOCK for a stated time and reason; it counts again by itself when the time is over."""
    if end:
        _ask(output, Verb.END_BYPASS, name, who, interlock)
        return
    if not reason.strip() or not duration:
        raise click.UsageError('a bypass needs --reason and --for, e.g. --for "10 min" --reason "sensor exchanged"')
    _ask(output, Verb.BYPASS, name, who, interlock, {"reason": reason.strip(), "duration_s": _seconds(duration)})


def _seconds(duration: str) -> float:
    """A time as it was typed; ``UsageError`` when it is none."""
    try:
        return parse_quantity(duration, "time")
    except UnitError as error:
        raise click.UsageError(f"--for: {error}") from error


@click.command()
@click.argument("alarm")
@click.option("--reason", default="", help="Why. Needed.")
@click.option("--for", "duration", default="", metavar="TIME", help='How long, with its unit: "30 min". Needed.')
@_common
def shelve(output: Output, alarm: str, reason: str, duration: str, name: str, who: str) -> None:
    """Hide ALARM for a stated time and reason; it counts again by itself. Interlocks do not notice."""
    if not reason.strip() or not duration:
        raise click.UsageError('shelving needs --reason and --for, e.g. --for "30 min" --reason "flask is exchanged"')
    _ask(output, Verb.SHELVE, name, who, alarm, {"reason": reason.strip(), "duration_s": _seconds(duration)})


@click.command()
@click.argument("alarm")
@_common
def unshelve(output: Output, alarm: str, name: str, who: str) -> None:
    """Show ALARM again before its time; what still stands is told anew."""
    _ask(output, Verb.UNSHELVE, name, who, alarm)


@click.command("out-of-service")
@click.argument("alarm")
@click.option("--reason", default="", help="Why. Needed, unless --return.")
@click.option("--return", "back", is_flag=True, help="Put it into service again.")
@_common
def out_of_service(output: Output, alarm: str, reason: str, back: bool, name: str, who: str) -> None:
    """Hide ALARM for maintenance until it is returned. A restart returns it too."""
    if back:
        _ask(output, Verb.RETURN, name, who, alarm)
        return
    if not reason.strip():
        raise click.UsageError('an alarm goes out of service for a --reason, e.g. --reason "level switch is exchanged"')
    _ask(output, Verb.REMOVE, name, who, alarm, {"reason": reason.strip()})
