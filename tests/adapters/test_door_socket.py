"""The door over a real socket: answers, snapshots, events, bad input, slow and too many clients."""

from __future__ import annotations

import asyncio
import json
import os
import stat
from collections.abc import AsyncIterator
from pathlib import Path

import pytest

from rigd.adapters import door_server
from rigd.adapters.door_client import SocketDoor
from rigd.adapters.door_server import DoorServer
from rigd.model.errors import DoorError
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request, Verb
from rigd.ports.door import EVENT_BACKLOG


class House:
    """A core that answers at once, except when told to be silent."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.requests: list[Request] = []
        self.silent = False
        self.alerts: list[str] = []
        snapshot = {"t_s": 1.5, "values": {"PT-1": {"v": None}}}
        self.door = DoorServer(path, self.submit, lambda: snapshot, lambda: 42, self.alerts.append)

    def submit(self, request: Request) -> None:
        self.requests.append(request)
        if self.silent:
            return
        result = "refused" if request.verb is Verb.RESUME else "accepted"
        fields = {"request_id": request.id, "who": request.who, "result": result, "detail": f"{result} it"}
        asyncio.get_running_loop().call_soon(
            self.door.tell, [Event(EventKind.REQUEST, request.verb, 42, "A text.", fields)]
        )


@pytest.fixture
async def house(tmp_path: Path) -> AsyncIterator[House]:
    house = House(tmp_path / "door.sock")
    await house.door.open()
    yield house
    await house.door.close("done", 0)
    assert not house.path.exists()


def note(number: int) -> Event:
    return Event(EventKind.NOTE, str(number), number, "x" * 200, {})


async def test_a_request_is_checked_stamped_and_answered(house: House) -> None:
    client = SocketDoor(house.path)
    assert await client.request("bypass", "ann", "PT", {"reason": "test", "duration_s": 60}) == "accepted it"
    (request,) = house.requests
    assert (request.verb, request.who, request.target, request.t_ns) == (Verb.BYPASS, "ann", "PT", 42)
    assert request.args == {"reason": "test", "duration_s": 60.0}
    with pytest.raises(DoorError, match="refused it"):
        await client.request("resume", "ann")
    assert (await client.snapshot())["t_s"] == 1.5


async def test_the_front_tells_whether_somebody_can_be_alerted(house: House) -> None:
    for word in ("", "sms has not taken it"):
        await SocketDoor(house.path).tell_alerts(word)
    assert house.alerts == ["", "sms has not taken it"]
    assert not house.requests


async def test_only_the_user_may_open_the_door(house: House) -> None:
    assert stat.S_IMODE(os.stat(house.path).st_mode) == 0o600


async def test_two_clients_with_equal_ids_each_get_their_own_answer(house: House) -> None:
    first, second = SocketDoor(house.path), SocketDoor(house.path)
    results = await asyncio.gather(
        first.request("stop", "ann"), second.request("resume", "bob"), return_exceptions=True
    )
    assert results[0] == "accepted it"
    assert isinstance(results[1], DoorError)


async def test_a_core_that_does_not_answer_is_told_to_the_client(house: House, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(door_server, "ANSWER_S", 0.05)
    house.silent = True
    with pytest.raises(DoorError, match="no answer"):
        await SocketDoor(house.path).request("hold", "ann")


@pytest.mark.parametrize(
    ("line", "words"),
    [
        (b"garbage\n", "one JSON object per line"),
        (b"[1]\n", "one JSON object per line"),
        (b'{"do": "dance"}\n', "unknown word"),
        (b'{"do": "request", "verb": "explode", "who": "ann"}\n', "allowed are start, hold"),
        (b'{"do": "request", "verb": "stop"}\n', "name of the person"),
        (b'{"do": "request", "verb": "stop", "who": "a", "args": {"x": [1]}}\n', "texts or numbers"),
        (b"x" * 20_000 + b"\n", "16384 bytes"),
    ],
)
async def test_bad_lines_are_answered_not_obeyed(house: House, line: bytes, words: str) -> None:
    reader, writer = await asyncio.open_unix_connection(house.path)
    writer.write(line)
    reply = json.loads(await asyncio.wait_for(reader.readline(), 2))
    assert reply["ok"] is False
    assert words in reply["detail"]
    assert not house.requests
    writer.close()


async def test_a_late_subscriber_gets_the_events_before_and_the_end(house: House) -> None:
    house.door.tell([note(1), note(2)])
    stream = SocketDoor(house.path).messages()
    heard = [await anext(stream), await anext(stream)]
    house.door.refresh()
    heard.append(await anext(stream))
    house.door.tell([note(3)])
    heard.append(await anext(stream))
    await house.door.close("tripped", 1)
    heard.extend([message async for message in stream])
    assert [message["say"] for message in heard] == ["event", "event", "snapshot", "event", "end"]
    assert [message["n"] for message in heard if message["say"] == "event"] == [1, 2, 3]
    assert heard[-1] == {"say": "end", "outcome": "tripped", "exit": 1}


async def test_a_client_that_does_not_read_is_dropped_and_others_are_not(house: House) -> None:
    slow_reader, slow_writer = await asyncio.open_unix_connection(house.path, limit=1024)
    slow_writer.write(b'{"do": "subscribe"}\n')
    good = SocketDoor(house.path).messages()
    counted = asyncio.ensure_future(count_events(good))
    await asyncio.sleep(0.05)
    total = 5 * EVENT_BACKLOG
    for number in range(total):
        house.door.tell([note(number)])
        if number % 50 == 0:
            await asyncio.sleep(0)
    await asyncio.sleep(0.2)
    assert len(house.door._clients) == 1
    await house.door.close("done", 0)
    assert await asyncio.wait_for(counted, 5) == total
    slow_writer.close()
    assert slow_reader is not None


async def count_events(stream: AsyncIterator[object]) -> int:
    count = 0
    async for message in stream:
        count += message["say"] == "event"  # type: ignore[index]
    return count


async def test_nobody_home(tmp_path: Path) -> None:
    with pytest.raises(DoorError, match="no daemon listens"):
        await SocketDoor(tmp_path / "none.sock").request("stop", "ann")


@pytest.mark.parametrize(
    "line",
    [
        b"[" * 16000,
        b'{"do": "request", "verb": "hold", "who": "\\ud800"}',
        b'{"do": "request", "verb": "hold", "who": "\\u001b[2J"}',
        b'{"do": "request", "verb": "hold", "who": "ann", "target": "' + b"x" * 5000 + b'"}',
        b'{"do": "request", "verb": "bypass", "who": "ann", "args": {"duration_s": NaN}}',
        b'{"do": "request", "verb": "bypass", "who": "ann", "args": {"duration_s": 1' + b"0" * 400 + b"}}",
    ],
)
async def test_what_no_journal_or_terminal_can_hold_never_becomes_a_request(house: House, line: bytes) -> None:
    reader, writer = await asyncio.open_unix_connection(house.path)
    writer.write(line + b"\n")
    async with asyncio.timeout(2):
        reply = json.loads(await reader.readline())
        writer.close()
        assert (reply["say"], reply["ok"], house.requests) == ("answer", False, [])
        assert (await SocketDoor(house.path).snapshot())["t_s"] == 1.5


async def test_a_flood_of_questions_whose_answers_nobody_reads_is_not_stored(house: House) -> None:
    _, writer = await asyncio.open_unix_connection(house.path)
    with pytest.raises(TimeoutError):  # the daemon reads no more from it
        await asyncio.wait_for(flood(writer), 2)
    assert max(len(client._lines) for client in house.door._clients) <= door_server.OWED_MAX + 1
    assert await SocketDoor(house.path).request("stop", "ann") == "accepted it"
    writer.transport.abort()


async def flood(writer: asyncio.StreamWriter) -> None:
    while True:
        writer.write(b'{"do": "snapshot"}\n' * 500)
        await writer.drain()


async def test_clients_that_say_nothing_or_only_watch_do_not_keep_a_stop_out(house: House) -> None:
    silent = [await asyncio.open_unix_connection(house.path) for _ in range(2 * door_server.CLIENTS_MAX)]
    assert await SocketDoor(house.path).request("stop", "ann") == "accepted it"
    watching = [await asyncio.open_unix_connection(house.path) for _ in range(door_server.SUBSCRIBERS_MAX + 1)]
    for _, writer in watching:
        writer.write(b'{"do": "subscribe"}\n')
        await writer.drain()
        await asyncio.sleep(0.01)
    assert b"watching already" in await watching[-1][0].readline()
    assert await SocketDoor(house.path).request("cut", "ann") == "accepted it"
    for _, writer in silent + watching:
        writer.transport.abort()
