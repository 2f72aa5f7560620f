"""Control of a running simulator: faults in, truth out.

A Unix socket ``<folder>/sim.sock``; one JSON object per line, UTF-8, each answered by one line.

| request | answer, besides ``"ok": true`` |
| --- | --- |
| ``{"do": "fault", "kind": k, "target": t, "magnitude": 1.0, "duration_s": d, "after_s": 0}`` | ``onset_s`` |
| ``{"do": "clear", "kind": k, "target": t}`` | ``ended``: how many |
| ``{"do": "truth"}`` | ``t_s``, ``truth``: see ``rigd.ports.plant.Plant.truth`` |
| ``{"do": "faults"}`` | ``t_s``, ``active``: list of faults, ``kinds``: list of what there is |
| ``{"do": "stop"}`` | the server ends after this answer |

``magnitude``, ``duration_s`` (until cleared) and ``after_s`` may be left out; all times are process time. What cannot
be done is answered ``{"ok": false, "why": sentence}``.
"""

from __future__ import annotations

import contextlib
import json
import math
import selectors
import socket
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from rigd.model.errors import DoorError, RigError
from rigd.ports.plant import FaultSpec
from rigd_sim.bench.meeting import SOCKET
from rigd_sim.bench.world import World

LINE_MAX = 65_536
ANSWER_WAIT_s = 5.0

Answer = dict[str, Any]


def ask(folder: str | Path, message: Mapping[str, Any], timeout_s: float = ANSWER_WAIT_s) -> Answer:
    """Send one control line to the simulator that serves ``folder`` and return its answer.

    Raises ``DoorError`` when nobody serves there, the answer does not come in time, or it is a refusal.
    """
    try:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as door:
            door.settimeout(timeout_s)
            door.connect(str(Path(folder) / SOCKET))
            door.sendall(json.dumps(message).encode() + b"\n")
            with door.makefile("rb") as lines:
                answer = json.loads(lines.readline())
    except (OSError, ValueError) as error:
        raise DoorError(f"no simulator answers in {folder} ({error})") from error
    if not answer.get("ok"):
        raise DoorError(str(answer.get("why", "refused")))
    return dict(answer)


@dataclass(slots=True)
class Halt:
    """Whether the server was asked to end."""

    asked: bool = False


class Commands:
    """What the control lines do to a world."""

    def __init__(self, world: World, halt: Halt) -> None:
        self._world = world
        self._halt = halt

    def answer(self, line: bytes) -> Answer:
        """Carry out one line."""
        handlers = {name: getattr(self, f"_{name}") for name in ("fault", "clear", "truth", "faults", "stop")}
        try:
            message = json.loads(line)
            handler = handlers.get(str(message.get("do"))) if isinstance(message, dict) else None
            if handler is None:
                return {"ok": False, "why": f'a control line is an object with "do" one of {", ".join(handlers)}'}
            return {"ok": True, **handler(message)}
        except (RigError, ValueError, TypeError, KeyError, RecursionError) as error:
            return {"ok": False, "why": f"{error}" or "the line cannot be read"}

    def _fault(self, message: Answer) -> Answer:
        onset_s = self._world.now_s + _number(message, "after_s", 0.0)
        duration_s, magnitude = _number(message, "duration_s", math.inf), _number(message, "magnitude", 1.0)
        fault = FaultSpec(_text(message, "kind"), _text(message, "target"), onset_s, duration_s, magnitude)
        self._world.inject(fault)
        return {"onset_s": onset_s}

    def _clear(self, message: Answer) -> Answer:
        return {"ended": self._world.clear(_text(message, "kind"), _text(message, "target"))}

    def _truth(self, message: Answer) -> Answer:
        truth = {name: _finite(value) for name, value in self._world.truth().items()}
        return {"t_s": self._world.now_s, "truth": truth}

    def _faults(self, message: Answer) -> Answer:
        active = [{name: _finite(value) for name, value in asdict(fault).items()} for fault in self._world.faults()]
        return {"t_s": self._world.now_s, "active": active, "kinds": [asdict(kind) for kind in self._world.kinds]}

    def _stop(self, message: Answer) -> Answer:
        self._halt.asked = True
        return {}


class ControlDoor:
    """The listening socket and its clients. ``before`` is called before each line, to bring the world up to date."""

    def __init__(self, path: Path, commands: Commands, selector: selectors.BaseSelector, before: Callable[[], None]):
        self._commands = commands
        self._selector = selector
        self._before = before
        self._clients: dict[socket.socket, bytearray] = {}
        self._listener = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        try:
            self._listener.bind(str(path))
        except OSError as error:
            self._listener.close()
            raise RigError(f"cannot listen on {path}: {error.strerror or error}; use a shorter folder") from error
        path.chmod(0o600)
        self._listener.listen()
        self._listener.setblocking(False)
        selector.register(self._listener, selectors.EVENT_READ, self._welcome)

    def close(self) -> None:
        """Close all sockets."""
        for client in list(self._clients):
            self._part(client)
        self._listener.close()

    def _welcome(self) -> None:
        with contextlib.suppress(OSError):
            client, _ = self._listener.accept()
            client.setblocking(False)
            self._clients[client] = bytearray()
            self._selector.register(client, selectors.EVENT_READ, lambda: self._ready(client))

    def _ready(self, client: socket.socket) -> None:
        try:
            data = client.recv(LINE_MAX)
        except BlockingIOError:
            return
        except OSError:
            data = b""
        text = self._clients[client]
        text += data
        if not data or len(text) > LINE_MAX:
            self._part(client)
            return
        *lines, rest = bytes(text).split(b"\n")
        text[:] = rest
        for line in lines:
            self._before()
            self._reply(client, self._commands.answer(line))

    def _reply(self, client: socket.socket, answer: Answer) -> None:
        """Answers are small; a client that does not read them for a second is dropped."""
        try:
            client.settimeout(1.0)
            client.sendall(json.dumps(answer, allow_nan=False).encode() + b"\n")
            client.setblocking(False)
        except OSError:
            self._part(client)

    def _part(self, client: socket.socket) -> None:
        if self._clients.pop(client, None) is not None:
            self._selector.unregister(client)
            client.close()


def _text(message: Answer, name: str) -> str:
    value = message.get(name)
    if not isinstance(value, str):
        raise ValueError(f'"{name}" must be given, as a text')
    return value


def _number(message: Answer, name: str, otherwise: float) -> float:
    value = message.get(name)
    if value is None:
        return otherwise
    if isinstance(value, bool) or not isinstance(value, int | float) or math.isnan(value):
        raise ValueError(f'"{name}" must be a number')
    return float(value)


def _finite(value: object) -> object:
    """JSON has no infinity and no NaN: those become null."""
    return None if isinstance(value, float) and not math.isfinite(value) else value
