"""``rigd fault``: inject, clear and list faults in a simulator that is being served."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import click

from rigd.console.fault_words import number, seconds
from rigd.console.output import Output, json_option


@click.group()
def fault() -> None:
    """Inject, clear or list faults in a running simulator (rigd sim). Kinds are listed by: rigd faults"""


def _rig_option(command: Any) -> Any:
    text = "Name of the simulated rig; needed when several are served."
    return click.option("--rig", "rig", default="", metavar="NAME", help=text)(command)


@fault.command()
@click.argument("kind")
@click.argument("target")
@click.option(
    "--for", "duration", default="", metavar="TIME", help="How long (process time); until cleared if not given."
)
@click.option("--after", default="0 s", metavar="TIME", help="Begin this much later (process time).")
@click.option("--size", default="1", metavar="NUMBER", help="Magnitude; what it means depends on the kind.")
@_rig_option
@json_option
@click.pass_obj
def inject(output: Output, kind: str, target: str, duration: str, after: str, size: str, rig: str) -> None:
    """Begin a fault of KIND on TARGET."""
    message: dict[str, Any] = {"do": "fault", "kind": kind, "target": target}
    message["magnitude"] = number(size, "--size")
    message["after_s"] = seconds(after, "--after")
    if duration:
        message["duration_s"] = seconds(duration, "--for")
    answer = _ask(rig, message)
    output.document(answer)
    output.say(f"[yellow]{kind}[/] on {target} from {answer.get('onset_s', 0.0):.1f} s of process time")


@fault.command()
@click.argument("kind")
@click.argument("target")
@_rig_option
@json_option
@click.pass_obj
def clear(output: Output, kind: str, target: str, rig: str) -> None:
    """End all faults of KIND on TARGET."""
    answer = _ask(rig, {"do": "clear", "kind": kind, "target": target})
    output.document(answer)
    output.say(f"{kind} on {target} ended")


@fault.command(name="list")
@_rig_option
@json_option
@click.pass_obj
def list_(output: Output, rig: str) -> None:
    """Show the faults that are in force or still to come."""
    answer = _ask(rig, {"do": "faults"})
    active = answer.get("active", [])
    output.document({"t_s": answer.get("t_s"), "active": active})
    if not active:
        output.say("no fault is in force")
    for one in active:
        lasts = one.get("duration_s")
        until = "until cleared" if lasts is None or math.isinf(lasts) else f"for {lasts:g} s"
        when = f"from {one['onset_s']:.1f} s, {until}"
        output.say(f"[yellow]{one['kind']}[/] on {one['target']} {when}, size {one['magnitude']:g}")


def _ask(rig: str, message: dict[str, Any]) -> dict[str, Any]:
    from rigd.adapters.sim_client import ask

    return ask(_folder(rig), message)


def _folder(rig: str) -> Path:
    from rigd.adapters.places import runtime_folder
    from rigd.model.errors import DoorError

    if rig:
        return runtime_folder() / rig
    served = [meeting.parent for meeting in sorted(runtime_folder().glob("*/ports.json"))]
    if not served:
        raise DoorError("no simulated rig is being served; start one with: rigd sim RIG")
    if len(served) > 1:
        raise DoorError(f"several simulated rigs are served; name one with --rig: {', '.join(s.name for s in served)}")
    return served[0]
