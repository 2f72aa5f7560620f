"""The daemon's door: a Unix socket, one JSON object per line (``rigd.ports.door`` has the words).

A client can never hold up the daemon: what it does not read waits for it, snapshots only the newest, events up to
``EVENT_BACKLOG``; then it is dropped. What it sends is checked before it becomes a request, and each request is
answered exactly once: with the core's REQUEST event, or, when none came in ``ANSWER_S``, with a refusal that says so.
A client that asks faster than it reads is not listened to meanwhile. Clients that say nothing cannot keep others out:
subscribers never fill all places, and of the others the one that was silent longest makes room.
"""

from __future__ import annotations

import asyncio
import contextlib
import json
import math
import os
from collections import deque
from collections.abc import Callable, Mapping, Sequence
from itertools import count
from pathlib import Path
from typing import Any

from rigd.model.errors import DoorError
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request, Verb
from rigd.ports.door import EVENT_BACKLOG

LINE_MAX = 16_384
ANSWER_S = 10.0
SNAPSHOT_S = 0.2
CLIENTS_MAX = 32
SUBSCRIBERS_MAX = 24
OWED_MAX = 64
"""Lines that may wait for a client before no more is read from it."""
ASKING_S = 0.002
"""Pause after each line of a client, so that a flood of them leaves the loop to the scans."""
TEXT_MAX = 400
"""Longest name, target or text of a request [characters]."""

Message = Mapping[str, object]


class DoorServer:
    """Serves clients on ``path``. ``submit`` takes a request into the core; ``snapshot`` makes the current one.

    ``now_ns`` stamps requests with process time; ``alerts`` hears why nobody can be alerted ("": somebody can).
    """

    def __init__(
        self,
        path: Path,
        submit: Callable[[Request], None],
        snapshot: Callable[[], Message],
        now_ns: Callable[[], int],
        alerts: Callable[[str], None] = lambda down: None,
    ) -> None:
        self._alerts = alerts
        self._path, self._submit, self._snapshot, self._now_ns = path, submit, snapshot, now_ns
        self._server: asyncio.Server | None = None
        self._clients: set[_Client] = set()
        self._asked: dict[str, tuple[_Client, str, asyncio.TimerHandle]] = {}
        self._recent: deque[bytes] = deque(maxlen=EVENT_BACKLOG)
        self._count = 0
        self._requests = 0
        self._turns = count()  # the order in which clients were last heard

    async def open(self) -> None:
        """Listen; the socket is the user's alone. ``DoorError`` when that is not possible."""
        with contextlib.suppress(FileNotFoundError):
            self._path.unlink()
        old = os.umask(0o177)
        try:
            self._server = await asyncio.start_unix_server(self._serve, self._path, limit=LINE_MAX)
        except OSError as error:
            raise DoorError(f"cannot listen on {self._path}: {error.strerror}") from error
        finally:
            os.umask(old)

    def tell(self, events: Sequence[Event]) -> None:
        """Hand events to all subscribers and answers to those who asked; never waits."""
        for event in events:
            self._count += 1
            line = _line(
                {
                    "say": "event",
                    "n": self._count,
                    "kind": event.kind,
                    "subject": event.subject,
                    "t_s": event.t_ns / 1e9,
                    "text": event.text,
                    "fields": dict(event.fields),
                }
            )
            self._recent.append(line)
            for client in self._clients:
                client.event(line)
            if event.kind is EventKind.REQUEST:
                self._answer(event)

    def refresh(self) -> None:
        """Send a new snapshot to subscribers that have read the last one; call it at most every ``SNAPSHOT_S``."""
        waiting = [client for client in self._clients if client.wants_snapshot]
        if waiting:
            line = _line({"say": "snapshot", **self._snapshot()})
            for client in waiting:
                client.snapshot(line)

    async def close(self, outcome: str, exit_code: int) -> None:
        """Say the end to all, give them a second to read it, and stop listening."""
        line = _line({"say": "end", "outcome": outcome, "exit": exit_code})
        if self._server is not None:
            self._server.close()
        for client in self._clients:
            client.last(line)
        await self._all_gone()
        for client in list(self._clients):
            client.drop()
        await self._all_gone()
        with contextlib.suppress(OSError):
            self._path.unlink()

    async def _all_gone(self) -> None:
        with contextlib.suppress(TimeoutError):
            async with asyncio.timeout(1.0):
                for client in list(self._clients):
                    await client.done.wait()

    async def _serve(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        client = _Client(writer, next(self._turns))
        if len(self._clients) >= CLIENTS_MAX and not self._make_room():
            writer.write(_line(_no("", f"{CLIENTS_MAX} clients are connected already")))
            writer.close()
            return
        self._clients.add(client)
        listener = asyncio.ensure_future(self._listen(reader, client))
        try:
            await client.send_all()
        except (OSError, asyncio.CancelledError):
            pass  # the client went away, or the daemon ends
        finally:
            listener.cancel()
            client.done.set()
            self._clients.discard(client)
            writer.close()

    async def _listen(self, reader: asyncio.StreamReader, client: _Client) -> None:
        try:
            while line := await reader.readline():
                client.heard = next(self._turns)
                client.say(self._heard(line, client))
                await asyncio.sleep(ASKING_S)
                await client.has_room()
        except ValueError:
            client.say(_no("", f"a line may hold {LINE_MAX} bytes"))
        except OSError:
            pass  # the client went away
        client.finish()

    def _heard(self, line: bytes, client: _Client) -> Message | None:
        """Do what a line asks; returns what to say at once, or ``None`` when the answer comes later."""
        try:
            message = json.loads(line)
            do = message["do"]
        except (ValueError, TypeError, KeyError, RecursionError):
            return _no("", 'send one JSON object per line, such as {"do": "snapshot"}')
        if do == "snapshot":
            return {"say": "snapshot", **self._snapshot()}
        if do == "alerts":
            self._alerts(str(message.get("down", ""))[:TEXT_MAX])
            return {"say": "answer", "id": "", "ok": True, "detail": "noted"}
        if do == "subscribe":
            if sum(one.subscribed for one in self._clients) >= SUBSCRIBERS_MAX:
                return _no("", f"{SUBSCRIBERS_MAX} clients are watching already; close one of them")
            client.subscribe(self._recent)
            return None
        if do == "request":
            return self._request(message, client)
        return _no(str(message.get("id", "")), f"unknown word {do!r}; say request, subscribe or snapshot")

    def _request(self, message: Mapping[str, Any], client: _Client) -> Message | None:
        own_id = str(message.get("id", ""))
        try:
            request = self._read(message)
        except DoorError as error:
            return _no(own_id, str(error))
        timer = asyncio.get_running_loop().call_later(ANSWER_S, self._unanswered, request.id)
        self._asked[request.id] = (client, own_id, timer)
        self._submit(request)
        return None

    def _read(self, message: Mapping[str, Any]) -> Request:
        try:
            verb = Verb(str(message.get("verb")))
        except ValueError:
            allowed = ", ".join(verb.value for verb in Verb)
            raise DoorError(f"unknown verb {message.get('verb')!r}; allowed are {allowed}") from None
        who, target, args = message.get("who"), message.get("target", ""), message.get("args", {})
        if not isinstance(who, str) or not who.strip():
            raise DoorError("a request needs the name of the person who asks, as who")
        if not isinstance(target, str) or not isinstance(args, dict):
            raise DoorError("target must be text and args an object")
        args = {_plain(str(key)): _argument(value) for key, value in args.items()}
        who, target = _plain(who.strip()), _plain(target)
        self._requests += 1
        return Request(f"door-{self._requests}", verb, who, self._now_ns(), target, args)

    def _make_room(self) -> bool:
        """Send away the client that was silent longest; False when all of them watch."""
        silent = [client for client in self._clients if not client.subscribed]
        if silent:
            away = min(silent, key=lambda client: client.heard)
            self._clients.discard(away)
            away.drop()
        return bool(silent)

    def _answer(self, event: Event) -> None:
        asked = self._asked.pop(str(event.fields.get("request_id", "")), None)
        if asked is not None:
            client, own_id, timer = asked
            timer.cancel()
            detail = str(event.fields.get("detail") or event.text)
            client.say(
                {"say": "answer", "id": own_id, "ok": event.fields.get("result") == "accepted", "detail": detail}
            )

    def _unanswered(self, request_id: str) -> None:
        asked = self._asked.pop(request_id, None)
        if asked is not None:
            asked[0].say(_no(asked[1], f"no answer within {ANSWER_S:g} s; look at the rig"))


class _Client:
    """What one client is still owed."""

    def __init__(self, writer: asyncio.StreamWriter, heard: int) -> None:
        self._writer = writer
        self.heard = heard
        self._lines: deque[bytes] = deque()
        self._snapshot: bytes | None = None
        self._subscribed = False
        self._ending = False
        self._wake = asyncio.Event()
        self._room = asyncio.Event()
        self.done = asyncio.Event()
        writer.transport.set_write_buffer_limits(high=LINE_MAX)

    @property
    def wants_snapshot(self) -> bool:
        return self._subscribed and self._snapshot is None and not self._ending

    @property
    def subscribed(self) -> bool:
        return self._subscribed

    async def has_room(self) -> None:
        """Wait until the client has read most of what it is owed, or is gone."""
        while len(self._lines) > OWED_MAX and not self._subscribed and not self._ending:
            self._room.clear()
            await self._room.wait()

    def subscribe(self, recent: deque[bytes]) -> None:
        if not self._subscribed:
            self._subscribed = True
            self._lines.extend(recent)
            self._wake.set()

    def event(self, line: bytes) -> None:
        if not self._subscribed:
            return
        self._lines.append(line)
        self._wake.set()
        if len(self._lines) > 2 * EVENT_BACKLOG:
            self.drop()

    def say(self, message: Message | None) -> None:
        if message is not None:
            self._lines.append(_line(message))
            self._wake.set()

    def snapshot(self, line: bytes) -> None:
        self._snapshot = line
        self._wake.set()

    def last(self, line: bytes) -> None:
        if self._subscribed:
            self._lines.append(line)
        self.finish()

    def finish(self) -> None:
        """Send what is owed, then end."""
        self._ending = True
        self._wake.set()

    def drop(self) -> None:
        """End at once."""
        self._lines.clear()
        self._writer.transport.abort()
        self.finish()

    async def send_all(self) -> None:
        while True:
            while self._lines or self._snapshot is not None:
                self._writer.write(self._next())
                await self._writer.drain()
            if self._ending:
                return
            self._wake.clear()
            await self._wake.wait()

    def _next(self) -> bytes:
        self._room.set()
        if self._lines:
            return self._lines.popleft()
        line, self._snapshot = self._snapshot or b"", None
        return line


def _line(message: Message) -> bytes:
    try:
        text = json.dumps(message, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    except ValueError:  # not-a-number and infinity are no JSON
        text = json.dumps(_finite(message), ensure_ascii=False, separators=(",", ":"))
    return text.encode(errors="replace") + b"\n"


def _finite(value: object) -> object:
    if isinstance(value, Mapping):
        return {key: _finite(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(inner) for inner in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def _plain(text: str) -> str:
    """Text that a journal, a message and a terminal can hold: printable, of one line, not endless; or ``DoorError``."""
    if len(text) > TEXT_MAX or not text.isprintable():
        raise DoorError(f"names and texts of a request are printable, of one line and at most {TEXT_MAX} characters")
    return text


def _argument(value: object) -> str | float:
    """An argument of a request: text or a finite number; or ``DoorError``."""
    if isinstance(value, str):
        return _plain(value)
    try:
        number = float(value) if isinstance(value, int | float) else math.nan
    except OverflowError:
        number = math.nan
    if not math.isfinite(number):
        raise DoorError("the values of args must be texts or numbers, and the numbers finite")
    return number


def _no(own_id: str, detail: str) -> Message:
    return {"say": "answer", "id": own_id, "ok": False, "detail": detail}
