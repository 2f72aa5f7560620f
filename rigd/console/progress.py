"""``python -m rigd.console.progress FOLDER``: one line about a run, on stderr, until it ends.

A client of the door like any other: it may be killed at any time. Without a terminal it prints one line per phase,
point, trip and alarm instead.
"""

from __future__ import annotations

import asyncio
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rich.console import Console
from rich.live import Live
from rich.text import Text

from rigd.adapters.door_client import SocketDoor
from rigd.adapters.places import Daemon, read_json, running_daemons
from rigd.console.flow_drawing import quantity
from rigd.console.watch_state import Told, Watched, heard, told
from rigd.console.watch_view import PRIORITY_STYLES, bar, clock_words, left_words
from rigd.model.errors import DoorError

APPEAR_S = 60.0
"""A daemon that has not opened its door by then is not waited for."""
KINDS_PRINTED = ("phase", "point", "trip", "alarm", "stop", "run state", "fault")
STYLES = {"trip": "bold red", "alarm": "yellow", "stop": "bold yellow", "fault": "red"}


def main(arguments: list[str]) -> int:
    """Show progress until the run ends; 0 then, 1 when no daemon appeared."""
    folder = _folder(Path(arguments[0]))
    console = Console(stderr=True, highlight=False, emoji=False)
    try:
        return asyncio.run(_follow(folder, console))
    except (KeyboardInterrupt, DoorError):
        return 1


def line(state: Watched, width: int) -> Text:
    """The one line: time, phase, points, pressures, temperatures, conversion, time left, alarms.

    What does not fit is left out in turn: first the bar, then the temperatures, then the pressures.
    """
    for without in ("", "bar", "bar temperature", "bar temperature pressure"):
        text = _line(state.snapshot, without)
        if text.cell_len < width:
            return text
    text.truncate(max(width - 1, 20), overflow="ellipsis")
    return text


def _line(snapshot: Mapping[str, Any], without: str) -> Text:
    phase, campaign = _mapping(snapshot.get("phase")), _mapping(snapshot.get("campaign"))
    text = Text(no_wrap=True)
    if _mapping(snapshot.get("run")).get("simulated"):
        text.append("SIM ", style="bold red")
    text.append(f"{clock_words(snapshot.get('t_s'))} ", style="dim")
    stop = str(snapshot.get("stop", "none"))
    if stop not in ("none", ""):
        text.append(f"{stop.upper()} ", style="bold red")
    name = phase.get("point") or phase.get("label") or phase.get("id") or snapshot.get("state", "")
    text.append(str(name), style="green")
    if isinstance(phase.get("progress"), int | float) and "bar" not in without:
        text.append(f" {bar(float(phase['progress']), 8)}", style="cyan")
    if campaign.get("total"):
        text.append(f"  {campaign.get('done', 0)}/{campaign['total']} points", style="bold")
    for measures, reading in readings(_mapping(snapshot.get("values"))):
        text.append("" if measures in without else f"  {reading}")
    left = campaign.get("left_s") if campaign.get("left_s") is not None else phase.get("left_s")
    if left is not None:
        text.append(f"  {left_words(left)} left", style="cyan")
    alarms = [alarm for alarm in snapshot.get("alarms") or () if isinstance(alarm, Mapping)]
    for alarm in sorted(alarms, key=lambda one: one.get("priority", 9))[:2]:
        text.append(f"  {alarm.get('id', '')}", style=PRIORITY_STYLES.get(alarm.get("priority", 4), "yellow"))
    return text


def readings(values: Mapping[str, Any]) -> list[tuple[str, str]]:
    """(what it measures, text): pressures together, the first two sensors' temperatures, conversions."""
    bars = [quantity(entry, "pressure") for entry in values.values() if entry.get("u") == "bar"]
    warm = [quantity(e, "temperature") for tag, e in values.items() if e.get("u") == "degC" and "." not in tag]
    parts = [("pressure", "/".join(part.removesuffix(" bar") for part in bars[:3]) + " bar")] if bars else []
    if warm:
        parts.append(("temperature", "/".join(part.removesuffix(" °C") for part in warm[:2]) + " °C"))
    converted = [quantity(entry, "fraction") for tag, entry in values.items() if tag.endswith(".conversion")]
    return parts + [("fraction", f"X {text}") for text in converted]


def printed(event: Told) -> Text | None:
    """What is printed about an event, ``None`` for those that are not."""
    if event.kind not in KINDS_PRINTED or event.fields.get("step") or event.fields.get("status") == "started":
        return None
    return Text.assemble(
        (f"{clock_words(event.t_s)} ", "dim"), (event.text or event.subject, STYLES.get(event.kind, ""))
    )


async def _follow(folder: Path, console: Console) -> int:
    daemon = await _daemon(folder)
    if daemon is None:
        return 1
    state = Watched()
    door = SocketDoor(daemon.door)
    live = Live(console=console, refresh_per_second=5, transient=True) if console.is_terminal else None
    if live is not None:
        live.start()
    try:
        async for message in door.messages():
            state = heard(state, message)
            if message.get("say") == "event":
                _print(console, told(message))
            if live is not None and state.snapshot:
                live.update(line(state, console.width))
    finally:
        if live is not None:
            live.stop()
    return 0


def _print(console: Console, event: Told) -> None:
    shown = printed(event)
    if shown is not None:
        console.print(shown, soft_wrap=not console.is_terminal)


async def _daemon(folder: Path) -> Daemon | None:
    """The daemon of a run folder, once its door is there; ``None`` when it has ended and no door will come."""
    for _ in range(round(APPEAR_S / 0.1)):
        daemon, listens = _announced(folder)
        if daemon is None or listens:
            return daemon
        await asyncio.sleep(0.1)
    return None


def _announced(folder: Path) -> tuple[Daemon | None, bool]:
    """The living daemon of a run folder, and whether its door is there."""
    wanted = folder.resolve()
    found = next((one for one in running_daemons() if Path(one.folder).resolve() == wanted), None)
    return found, found is not None and Path(found.door).exists()


def _folder(given: Path) -> Path:
    """The run folder itself, or that of a plan file."""
    return Path(str(read_json(given).get("folder", given.parent))) if given.is_file() else given


def _mapping(thing: Any) -> Mapping[str, Any]:
    return thing if isinstance(thing, Mapping) else {}


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
