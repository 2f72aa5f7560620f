"""Opens the port of a rig file and chooses the make of link for it."""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import Callable
from typing import Protocol, TypeVar

from rigd.adapters import folder_link, serial_link, socket_link
from rigd.adapters.places import SIMULATED
from rigd.model.devices import LinkSpec
from rigd.model.errors import LinkError
from rigd.ports.link import Link


class _Closable(Protocol):
    def close(self) -> None: ...


P = TypeVar("P", bound=_Closable)


async def open_link(spec: LinkSpec) -> Link:
    """Open ``spec.port`` without blocking the loop.

    ``folder:///path`` is a folder of files. ``socket://host:port`` and ports of the operating system are watched by the
    loop; everything else that the serial library opens gets threads.
    Raises ``LinkBusy``, ``LinkClosed`` or ``LinkError``, each with one sentence.
    """
    if spec.port == SIMULATED:
        raise LinkError(f"link {spec.id} is {SIMULATED!r}: its port is only known while the simulator serves the rig")
    if spec.port.startswith("socket://"):
        connection = await _in_thread(lambda: socket_link.connect(spec.port))
        return socket_link.make_link(spec.port, connection)
    if spec.port.startswith(folder_link.SCHEME):
        return folder_link.FolderLink(await asyncio.to_thread(folder_link.open_folder, spec.port))
    port = await _in_thread(lambda: serial_link.open_port(spec))
    return serial_link.make_link(spec, port)


async def _in_thread(open_it: Callable[[], P]) -> P:
    """Run a blocking open; when the caller gives up meanwhile, close what it opened afterwards."""
    opening = asyncio.get_running_loop().run_in_executor(None, open_it)
    try:
        return await asyncio.shield(opening)
    except asyncio.CancelledError:
        opening.add_done_callback(_close_unwanted)
        raise


def _close_unwanted(opening: asyncio.Future[P]) -> None:
    if not opening.cancelled() and opening.exception() is None:
        with contextlib.suppress(OSError):
            opening.result().close()
