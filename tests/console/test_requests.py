"""Requests from the command line reach the daemon's door with who, what and why, and its answer comes back."""

from __future__ import annotations

import asyncio
import getpass
import json
import os
import threading

import pytest

from rigd.adapters.door_server import DoorServer
from rigd.adapters.places import Daemon, announce, door_path
from rigd.console.cli import call
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request


class Daemonlike:
    """A door with nothing behind it that accepts or refuses everything."""

    def __init__(self, accept: bool) -> None:
        self.accept = accept
        self.asked: list[Request] = []
        self._ready, self._loop = threading.Event(), asyncio.new_event_loop()
        self._thread = threading.Thread(target=self._run, daemon=True)
        self._thread.start()
        assert self._ready.wait(5)

    def _run(self) -> None:
        self._loop.run_until_complete(self._open())
        self._loop.run_forever()

    async def _open(self) -> None:
        path = door_path("rig", os.getpid())
        self._door = DoorServer(path, self._submit, lambda: {"state": "running", "values": {}}, lambda: 7)
        await self._door.open()
        announce(Daemon(os.getpid(), "rig", "run-1", "/runs/run-1", str(path)))
        self._ready.set()

    def _submit(self, request: Request) -> None:
        self.asked.append(request)
        fields = {"request_id": request.id, "result": "accepted" if self.accept else "refused", "detail": "because"}
        self._loop.call_soon(self._door.tell, [Event(EventKind.REQUEST, request.verb, 7, "x", fields)])

    def close(self) -> None:
        asyncio.run_coroutine_threadsafe(self._door.close("done", 0), self._loop).result(5)
        self._loop.call_soon_threadsafe(self._loop.stop)
        self._thread.join(5)
        self._loop.close()


@pytest.fixture
def runtime(tmp_path, monkeypatch):
    monkeypatch.setenv("RIGD_RUNTIME", str(tmp_path / "rt"))


@pytest.fixture
def daemon(runtime):
    one = Daemonlike(accept=True)
    yield one
    one.close()


@pytest.mark.parametrize(
    ("arguments", "verb", "target"),
    [
        (["hold"], "hold", ""),
        (["resume"], "resume", ""),
        (["stop"], "stop", ""),
        (["cut"], "cut", ""),
        (["reset"], "reset", "*"),
        (["reset", "PRESSURE-HIGH"], "reset", "PRESSURE-HIGH"),
        (["acknowledge", "FLASK"], "acknowledge", "FLASK"),
        (["confirm", "bed"], "confirm", "bed"),
        (["bypass", "BED-HOT", "--end"], "end bypass", "BED-HOT"),
    ],
)
def test_verbs(daemon, arguments, verb, target, capsys):
    assert call(arguments) == 0
    (asked,) = daemon.asked
    assert (asked.verb, asked.target, asked.who) == (verb, target, getpass.getuser())
    assert "because" in capsys.readouterr().out


def test_a_bypass_carries_its_reason_and_time(daemon):
    assert call(["bypass", "BED-HOT", "--for", "10 min", "--reason", "sensor exchanged", "--as", "Ada"]) == 0
    (asked,) = daemon.asked
    assert (asked.verb, asked.who) == ("bypass", "Ada")
    assert dict(asked.args) == {"reason": "sensor exchanged", "duration_s": 600.0}


@pytest.mark.parametrize(
    "arguments",
    [["bypass", "X"], ["bypass", "X", "--for", "10 min"], ["bypass", "X", "--for", "10", "--reason", "y"], ["confirm"]],
)
def test_incomplete_requests_are_not_sent(daemon, arguments, capsys):
    assert call(arguments) == 2
    assert daemon.asked == []
    assert "Traceback" not in capsys.readouterr().err


def test_json_answer(daemon, capsys):
    assert call(["hold", "--json"]) == 0
    facts = json.loads(capsys.readouterr().out)
    assert facts == {"verb": "hold", "target": "", "run": "run-1", "ok": True, "detail": "because"}


def test_watch_once_shows_and_leaves(daemon, capsys):
    assert call(["watch", "--once", "--json"]) == 0
    assert json.loads(capsys.readouterr().out)["state"] == "running"
    assert daemon.asked == []


def test_a_refusal_is_a_sentence_and_exit_1(runtime, capsys):
    one = Daemonlike(accept=False)
    try:
        assert call(["reset"]) == 1
        assert "because" in capsys.readouterr().err
    finally:
        one.close()


def test_without_a_run_it_says_how_to_start_one(runtime, capsys):
    assert call(["stop"]) == 1
    assert "rigd run RIG RECIPE" in capsys.readouterr().err


def test_a_run_that_is_not_there_is_named(daemon, capsys):
    assert call(["stop", "--run", "other"]) == 1
    assert "run-1" in capsys.readouterr().err
