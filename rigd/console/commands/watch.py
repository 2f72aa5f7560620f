"""``rigd watch``: see a running rig."""

from __future__ import annotations

import asyncio
import contextlib
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import click
from rich.console import Console
from rich.live import Live

from rigd.adapters.door_client import SocketDoor, find_daemon
from rigd.adapters.places import Daemon
from rigd.console.output import Output, json_option
from rigd.console.watch_state import Watched, heard
from rigd.console.watch_view import view
from rigd.logic.flow_path import FlowPath, flow_path
from rigd.model.rig import RigDefinition

FRAME_S = 0.2


@click.command()
@click.option("--run", "name", default="", metavar="NAME", help="Which, when several runs go on.")
@click.option("--once", is_flag=True, help="Show the present state once and leave.")
@json_option
@click.pass_obj
def watch(output: Output, name: str, once: bool) -> None:
    """See a running rig. q or Ctrl-C leaves; the run goes on."""
    daemon = find_daemon(name)
    if once or output.json or not output.people.is_terminal:
        asyncio.run(_once(output, daemon))
        return
    with contextlib.suppress(KeyboardInterrupt):
        asyncio.run(_watch(output.people, daemon))


async def _once(output: Output, daemon: Daemon) -> None:
    snapshot = await SocketDoor(daemon.door).snapshot()
    output.document(snapshot)
    rig, path = _rig(daemon)
    output.say(view(heard(Watched(), snapshot), rig, path, output.people.width))


async def _watch(console: Console, daemon: Daemon) -> None:
    rig, path = _rig(daemon)
    state = Watched()
    left = asyncio.Event()
    loop = asyncio.get_running_loop()

    async def listen() -> None:
        nonlocal state
        async for message in SocketDoor(daemon.door).messages():
            state = heard(state, message)

    with (
        _keys(lambda: loop.call_soon_threadsafe(left.set), loop),
        Live(console=console, screen=True, auto_refresh=False) as live,
    ):
        listening = asyncio.create_task(listen())
        while not left.is_set() and not listening.done():
            live.update(view(state, rig, path, console.width, height=console.height), refresh=True)
            with contextlib.suppress(TimeoutError):
                await asyncio.wait_for(left.wait(), FRAME_S)
        listening.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await listening
    console.print(view(state, rig, path, console.width))


@contextlib.contextmanager
def _keys(leave: Callable[[], object], loop: asyncio.AbstractEventLoop) -> Iterator[None]:
    """Calls ``leave`` when q is typed; the terminal is put back as it was."""
    if not sys.stdin.isatty():
        yield
        return
    import termios
    import tty

    stdin = sys.stdin.fileno()
    before = termios.tcgetattr(stdin)
    tty.setcbreak(stdin)
    loop.add_reader(stdin, lambda: leave() if sys.stdin.read(1) in ("q", "Q") else None)
    try:
        yield
    finally:
        loop.remove_reader(stdin)
        termios.tcsetattr(stdin, termios.TCSADRAIN, before)


def _rig(daemon: Daemon) -> tuple[RigDefinition | None, FlowPath | None]:
    """The rig as the run froze it; nothing when it cannot be read (the values are shown all the same)."""
    from rigd.adapters.run_folder import RIG
    from rigd.config.load import load_rig
    from rigd.logic.flow_path import FlowPathError
    from rigd.model.errors import ConfigError

    try:
        rig = load_rig(Path(daemon.folder) / RIG)
        return rig, flow_path(rig)
    except (ConfigError, FlowPathError):
        return None, None
