"""A client of the daemon's door; what ``rigd watch``, ``rigd stop`` and the front process use."""

from __future__ import annotations

import asyncio
import json
from collections.abc import AsyncIterator, Mapping
from itertools import count
from pathlib import Path
from typing import Any

from rigd.adapters.places import Daemon, running_daemons
from rigd.model.errors import DoorError

CONNECT_S = 3.0
ANSWER_S = 15.0
LINE_MAX = 4_000_000


class SocketDoor:
    """Implements ``rigd.ports.door.DoorClient`` over a Unix socket; each call makes its own connection."""

    def __init__(self, path: Path | str) -> None:
        self._path = Path(path)
        self._ids = count(1)

    async def request(
        self, verb: str, who: str, target: str = "", args: Mapping[str, str | float] | None = None
    ) -> str:
        """Ask and wait for the answer; returns its detail, ``DoorError`` with the reason when refused."""
        own_id = f"r{next(self._ids)}"
        message = {"do": "request", "id": own_id, "verb": verb, "who": who, "target": target, "args": dict(args or {})}
        answer = await self._ask(message, "answer")
        detail = str(answer.get("detail", ""))
        if not answer.get("ok"):
            raise DoorError(detail)
        return detail

    async def snapshot(self) -> Mapping[str, object]:
        """One snapshot (``rigd.ports.door.SNAPSHOT_KEYS``)."""
        return await self._ask({"do": "snapshot"}, "snapshot")

    async def tell_alerts(self, down: str) -> None:
        """Say whether people can be alerted: "" when they can, else why not."""
        await self._ask({"do": "alerts", "down": down}, "answer")

    async def messages(self) -> AsyncIterator[Mapping[str, object]]:
        """Subscribe: first the last events, then snapshots and events until the daemon ends or goes away."""
        reader, writer = await self._connect()
        try:
            writer.write(b'{"do": "subscribe"}\n')
            while line := await reader.readline():
                message = _object(line)
                yield message
                if message.get("say") == "end":
                    return
        except OSError:
            return  # the daemon went away: the subscription is over
        finally:
            writer.close()

    async def _ask(self, message: Mapping[str, object], kind: str) -> Mapping[str, Any]:
        reader, writer = await self._connect()
        try:
            writer.write(json.dumps(message).encode() + b"\n")
            async with asyncio.timeout(ANSWER_S):
                while line := await reader.readline():
                    reply = _object(line)
                    if reply.get("say") == kind:
                        return reply
        except (OSError, TimeoutError) as error:
            raise DoorError(f"the daemon at {self._path} does not answer") from error
        finally:
            writer.close()
        raise DoorError(f"the daemon at {self._path} ended before it answered")

    async def _connect(self) -> tuple[asyncio.StreamReader, asyncio.StreamWriter]:
        try:
            async with asyncio.timeout(CONNECT_S):
                return await asyncio.open_unix_connection(self._path, limit=LINE_MAX)
        except (OSError, TimeoutError) as error:
            raise DoorError(f"no daemon listens at {self._path}; is the run still going?") from error


def find_daemon(name: str = "") -> Daemon:
    """The running daemon: the only one, or the one whose rig, run or run folder is ``name``. ``DoorError``
    otherwise."""
    daemons = running_daemons()
    if not daemons:
        raise DoorError("no run is going on; start one with: rigd run RIG RECIPE")
    if name:
        daemons = [one for one in daemons if name in (one.rig, one.run, one.folder, str(one.pid))]
        if not daemons:
            raise DoorError(f"no running daemon is called {name!r}; running: {_names(running_daemons())}")
    if len(daemons) > 1:
        raise DoorError(f"several runs are going on; name one of: {_names(daemons)}")
    return daemons[0]


def _names(daemons: list[Daemon]) -> str:
    return ", ".join(f"{daemon.run} (rig {daemon.rig})" for daemon in daemons)


def _object(line: bytes) -> Mapping[str, Any]:
    try:
        message = json.loads(line)
    except ValueError as error:
        raise DoorError("the daemon sent something that is not JSON; is it another version?") from error
    return message if isinstance(message, dict) else {}
