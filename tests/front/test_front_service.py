"""The front against a real broker and a real HTTP receiver, with both failing and coming back."""

from __future__ import annotations

import asyncio
import json
import time
from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager
from pathlib import Path
from typing import Any

import aiomqtt
import pytest
from fakes.broker import running_broker
from fakes.web_hook import web_hook

from rigd.adapters.alert_channels import AppriseSender, url_is_known
from rigd.front.service import Front
from rigd.model.rig import AlertChannel, MqttSpec, Outside

pytestmark = pytest.mark.broker

SNAPSHOT = {
    "say": "snapshot",
    "run": {"id": "r1", "simulated": True},
    "t_s": 1.5,
    "state": "running",
    "stop": "none",
    "interlocks": {"PRESSURE-HIGH": "tripped"},
    "alarms": [],
    "values": {"PT-1": {"v": 1.25, "q": "good", "c": "none", "u": "bar", "text": ""}},
}


def trip(number: int) -> dict[str, Any]:
    fields = {"value": 8.25, "limit": 8.0, "unit": "bar", "did": "stopped both pumps", "do": "find the block"}
    return {"say": "event", "n": number, "kind": "trip", "subject": f"T{number}", "text": "too high", "fields": fields}


class Door:
    """A door that says what the test puts in; ``None`` ends it."""

    def __init__(self) -> None:
        self.queue: asyncio.Queue[dict[str, Any] | None] = asyncio.Queue()
        self.silent = False  # True: ends without a last word, as a killed daemon does

    async def messages(self) -> AsyncIterator[dict[str, Any]]:
        while (message := await self.queue.get()) is not None:
            yield message


@asynccontextmanager
async def front(outside: Outside) -> AsyncIterator[Door]:
    door = Door()
    service = Front("bench", outside, [AppriseSender(channel) for channel in outside.channels])
    task = asyncio.create_task(service.run(door.messages()))
    try:
        yield door
    finally:
        if not door.silent:
            door.queue.put_nowait({"say": "end", "outcome": "done", "exit": 0})
        door.queue.put_nowait(None)
        await asyncio.wait_for(task, 20)


async def until(check: Callable[[], bool], within_s: float) -> None:
    deadline = time.monotonic() + within_s
    while not check():
        assert time.monotonic() < deadline, "did not happen in time"
        await asyncio.sleep(0.02)


@asynccontextmanager
async def subscriber(port: int, topic: str) -> AsyncIterator[list[aiomqtt.Message]]:
    seen: list[aiomqtt.Message] = []
    async with aiomqtt.Client("127.0.0.1", port) as client:
        await client.subscribe(topic, qos=1)

        async def listen() -> None:
            async for message in client.messages:
                seen.append(message)

        task = asyncio.create_task(listen())
        try:
            yield seen
        finally:
            task.cancel()
            await asyncio.gather(task, return_exceptions=True)


def mqtt(port: int) -> Outside:
    return Outside(mqtt=MqttSpec("127.0.0.1", port, prefix="lab"))


def numbers(seen: list[aiomqtt.Message]) -> list[int]:
    return [json.loads(message.payload)["event"]["n"] for message in seen]  # type: ignore[arg-type]


async def test_trip_reaches_a_subscriber_within_two_seconds(tmp_path: Path) -> None:
    with running_broker(tmp_path) as broker:
        async with subscriber(broker.port, "lab/bench/#") as seen, front(mqtt(broker.port)) as door:
            door.queue.put_nowait(SNAPSHOT)
            started = time.monotonic()
            door.queue.put_nowait(trip(1))
            await until(lambda: any(str(m.topic).endswith("/alert") for m in seen), 2.0)
            assert time.monotonic() - started < 2.0
        alert = json.loads(next(m for m in seen if str(m.topic) == "lab/bench/alert").payload)  # type: ignore[arg-type]
        for part in ("too high", "8.25 bar", "limit 8 bar", "stopped both pumps", "find the block"):
            assert part in alert["text"]
        assert alert["title"].startswith("SIMULATED bench")


async def test_state_is_retained_and_the_end_is_told(tmp_path: Path) -> None:
    with running_broker(tmp_path) as broker:
        async with front(mqtt(broker.port)) as door:
            door.queue.put_nowait(SNAPSHOT)
            await asyncio.sleep(0.5)
        async with subscriber(broker.port, "lab/bench/#") as seen:
            await until(lambda: len(seen) >= 3, 3)
        retained = {str(m.topic): m.payload for m in seen if m.retain}
        assert json.loads(retained["lab/bench/state"])["state"] == "running"  # type: ignore[arg-type]
        assert json.loads(retained["lab/bench/alarms"])["interlocks"] == {"PRESSURE-HIGH": "tripped"}  # type: ignore[arg-type]
        assert retained["lab/bench/status"] == b"finished"
        assert "lab/bench/value/PT-1" not in retained


@asynccontextmanager
async def faithful_subscriber(port: int, topic: str) -> AsyncIterator[list[aiomqtt.Message]]:
    """A subscriber with a session that the broker keeps; it comes back whenever the broker does."""
    seen: list[aiomqtt.Message] = []
    ready = asyncio.Event()

    async def listen() -> None:
        while True:
            try:
                async with aiomqtt.Client("127.0.0.1", port, identifier="keeper", clean_session=False) as client:
                    await client.subscribe(topic, qos=1)
                    ready.set()
                    async for message in client.messages:
                        seen.append(message)
            except aiomqtt.MqttError:
                await asyncio.sleep(0.05)

    task = asyncio.create_task(listen())
    await asyncio.wait_for(ready.wait(), 5)
    try:
        yield seen
    finally:
        task.cancel()
        await asyncio.gather(task, return_exceptions=True)


@pytest.mark.parametrize("trouble", ["dead", "frozen"])
async def test_alerts_survive_a_broker_in_trouble(tmp_path: Path, trouble: str) -> None:
    asyncio.get_running_loop().set_exception_handler(lambda *_: None)  # the library's noise on a dead socket
    with running_broker(tmp_path) as broker:
        async with faithful_subscriber(broker.port, "lab/bench/alert") as seen, front(mqtt(broker.port)) as door:
            door.queue.put_nowait(trip(1))
            await until(lambda: 1 in numbers(seen), 5)
            if trouble == "dead":
                broker.stop()
            else:
                broker.freeze()
            slowest_s = 0.0
            for number in range(2, 12):
                before = time.monotonic()
                door.queue.put_nowait(trip(number))
                await asyncio.sleep(0)
                slowest_s = max(slowest_s, time.monotonic() - before)
            await asyncio.sleep(1.0)
            if trouble == "dead":
                broker.start()
            else:
                broker.thaw()
            await until(lambda: 11 in numbers(seen), 15)
            got = numbers(seen)
    assert slowest_s < 0.05
    assert list(dict.fromkeys(got)) == list(range(1, 12))
    if trouble == "dead":
        assert len(got) == 11
    # a broker that freezes may have taken a message without saying so: the same id comes twice, never another order
    assert len(got) <= 12


async def test_web_hook_refusing_then_back_gets_each_alert_once_and_in_order() -> None:
    with web_hook() as hook:
        channel = AlertChannel("hook", f"json://127.0.0.1:{hook.port}/", priority_at_least=2)
        async with front(Outside(channels=(channel,))) as door:
            hook.refuse = True
            door.queue.put_nowait(SNAPSHOT)
            for number in (1, 2, 3):
                door.queue.put_nowait(trip(number))
            await until(lambda: hook.tries >= 1, 5)
            hook.refuse = False
            await until(lambda: len(hook.posts) == 3, 10)
        assert [post["title"].split()[-1] for post in hook.posts] == ["T1", "T2", "T3"]
        assert "find the block" in hook.posts[0]["message"]


async def test_deaf_web_hook_does_not_delay_the_broker(tmp_path: Path) -> None:
    with running_broker(tmp_path) as broker, web_hook() as hook:
        hook.deaf_s = 3.0
        channel = AlertChannel("hook", f"json://127.0.0.1:{hook.port}/", priority_at_least=2)
        outside = Outside(mqtt=MqttSpec("127.0.0.1", broker.port, prefix="lab"), channels=(channel,))
        async with subscriber(broker.port, "lab/bench/alert") as seen, front(outside) as door:
            await asyncio.sleep(0.3)
            door.queue.put_nowait(trip(1))
            await until(lambda: bool(seen), 2.0)
            assert not hook.posts


async def test_low_priorities_stay_away_from_a_channel_for_high_ones() -> None:
    with web_hook() as hook:
        channel = AlertChannel("hook", f"json://127.0.0.1:{hook.port}/", priority_at_least=1)
        async with front(Outside(channels=(channel,))) as door:
            door.queue.put_nowait(
                {"say": "event", "n": 1, "kind": "fault", "subject": "scan", "text": "late", "fields": {}}
            )
            door.queue.put_nowait(trip(2))
            await until(lambda: len(hook.posts) == 1, 5)
        assert [post["title"].split()[-1] for post in hook.posts] == ["T2"]


async def test_a_door_that_closes_without_a_last_word_is_an_alert() -> None:
    with web_hook() as hook:
        channel = AlertChannel("hook", f"json://127.0.0.1:{hook.port}/", priority_at_least=2)
        async with front(Outside(channels=(channel,))) as door:
            door.queue.put_nowait(SNAPSHOT)
            door.silent = True
        assert len(hook.posts) == 1
        assert "check that every pump has stopped" in hook.posts[0]["message"]


def test_unknown_channel_url_is_told() -> None:
    assert url_is_known("json://localhost/x")
    assert not url_is_known("nonsense")


class Deaf:
    """A channel that takes nothing, or everything."""

    def __init__(self, name: str, takes: bool, priority: int = 2) -> None:
        self.channel = AlertChannel(name, "json://nowhere/", priority)
        self.takes = takes

    async def send(self, title: str, text: str, urgent: bool) -> bool:
        return self.takes


@pytest.mark.parametrize(
    ("channels", "down"),
    [
        ([Deaf("a", False), Deaf("b", False)], True),
        ([Deaf("a", False), Deaf("b", True)], False),
        ([Deaf("a", False), Deaf("b", True, priority=1)], True),  # one that hears of trips only wakes nobody in time
        ([Deaf("a", True)], False),
    ],
)
async def test_nobody_can_be_alerted_when_every_channel_that_wakes_has_failed(
    channels: list[Deaf], down: bool, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("rigd.front.service.LAST_WORDS_S", 0.0)
    service = Front("bench", Outside(None, ()), channels)
    assert service.down() == ""
    door = Door()
    task = asyncio.create_task(service.run(door.messages()))
    door.queue.put_nowait(trip(1))
    await asyncio.sleep(0.1)
    assert bool(service.down()) is down
    task.cancel()
    await asyncio.gather(task, return_exceptions=True)
