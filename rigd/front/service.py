"""The front process: listens at the daemon's door and tells broker and alert channels.

One task per way out, each behind its own outbox, so that a dead broker never delays an e-mail and a deaf web hook never
delays the broker. Alerts to one channel go out once and in order: the head of the box is repeated until the receiver
took it.
"""

from __future__ import annotations

import asyncio
import contextlib
import logging
from collections.abc import AsyncIterator, Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

from rigd.adapters.mqtt_publisher import MqttPublisher
from rigd.front.alerts import Alert, alert_of
from rigd.front.outbox import Outbox
from rigd.front.telemetry import Publication, Topics
from rigd.model.rig import AlertChannel, Outside
from rigd.ports.door import WAKING

log = logging.getLogger(__name__)
SNAPSHOT_PERIOD_S = 0.5
RETRY_PAUSES_S = (1.0, 2.0, 5.0, 10.0, 30.0)
LAST_WORDS_S = 10.0


class Sender(Protocol):
    """One alert channel."""

    @property
    def channel(self) -> AlertChannel: ...
    async def send(self, title: str, text: str, urgent: bool) -> bool: ...


@dataclass(frozen=True, slots=True)
class _Letter:
    alert: Alert
    keep: bool = True


class Front:
    """Runs until the door closes, then gives what waits a last chance of ``LAST_WORDS_S``."""

    def __init__(
        self,
        rig: str,
        outside: Outside,
        senders: Sequence[Sender],
        attempted: Callable[[str, str, str, bool], None] = lambda alert, channel, title, taken: None,
    ) -> None:
        """``attempted`` hears of each attempt: alert, channel, title, and whether the receiver took it."""
        self._rig = rig
        self._attempted = attempted
        self._topics = Topics(outside.mqtt.prefix, rig) if outside.mqtt else None
        self._publications: Outbox[Publication] = Outbox()
        self._publisher = (
            MqttPublisher(outside.mqtt, self._publications, self._topics.status)  # type: ignore[arg-type]
            if outside.mqtt and self._topics
            else None
        )
        self._letters: list[tuple[Sender, Outbox[_Letter]]] = [(sender, Outbox()) for sender in senders]
        self._failing: dict[str, str] = {}
        self._simulated = False
        self._run_id = ""
        self._record: object = None
        self._next_snapshot_s = 0.0
        self._last_event = 0

    async def run(self, messages: AsyncIterator[Mapping[str, Any]]) -> None:
        """Tell the world what comes through the door; a door that closes without a last word is itself an alert."""
        tasks = [
            asyncio.create_task(self._post(sender, box), name=f"alerts[{sender.channel.name}]")
            for sender, box in self._letters
        ]
        if self._publisher:
            tasks.append(asyncio.create_task(self._publisher.run(), name="broker"))
        ended = False
        try:
            async for message in messages:
                ended = ended or message.get("say") == "end"
                self.hear(message)
            if not ended:
                self.hear(self._gone())
        finally:
            await self._last_words()
            for task in tasks:
                task.cancel()
            await asyncio.gather(*tasks, return_exceptions=True)
            if self._publisher:
                await self._publisher.farewell("finished")

    def down(self) -> str:
        """Why nobody can be woken now: every channel that wakes people failed with its last try; "" otherwise."""
        waking = [one.channel.name for one, _ in self._letters if one.channel.priority_at_least >= WAKING]
        if not waking or any(name not in self._failing for name in waking):
            return ""
        return "; ".join(f"{name} has not taken {self._failing[name]!r}" for name in waking)

    def hear(self, message: Mapping[str, Any]) -> None:
        """Sort one message from the door into the outboxes; never waits."""
        if message.get("say") == "snapshot":
            self._snapshot(message)
        elif message.get("say") == "event":
            self._event(message)

    def _snapshot(self, message: Mapping[str, Any]) -> None:
        run = message.get("run", {})
        self._simulated, self._run_id = bool(run.get("simulated")), str(run.get("id", ""))
        self._record = message.get("record")
        now_s = asyncio.get_running_loop().time()
        if self._topics and now_s >= self._next_snapshot_s:
            self._next_snapshot_s = now_s + SNAPSHOT_PERIOD_S
            for publication in self._topics.of_snapshot(message):
                self._publications.put(publication)

    def _event(self, message: Mapping[str, Any]) -> None:
        told = {key: value for key, value in message.items() if key != "say"}
        event = {"run": self._run_id, "record": self._record, **told}
        self._last_event = int(event["n"])
        alert = alert_of(event, self._rig, self._simulated)
        if self._topics:
            if alert:
                self._publications.put(self._topics.of_alert(alert))
            self._publications.put(self._topics.of_event(event))
        if alert:
            for sender, box in self._letters:
                if alert.priority <= sender.channel.priority_at_least:
                    box.put(_Letter(alert))

    def _gone(self) -> Mapping[str, Any]:
        text = "The control process ended without a last word. The guard sends every pump its stop; go and look."
        fields = {"did": "the guard took the ports over", "do": "check that every pump has stopped"}
        number = self._last_event + 1
        return {"say": "event", "n": number, "kind": "fault", "subject": "control", "text": text, "fields": fields}

    async def _post(self, sender: Sender, box: Outbox[_Letter]) -> None:
        failures = 0
        while True:
            letter = await box.head()
            alert = letter.alert
            taken = await sender.send(alert.title, alert.text, alert.priority <= 2)
            self._attempted(alert.id, sender.channel.name, alert.title, taken)
            if taken:
                self._failing.pop(sender.channel.name, None)
                box.sent(letter)
                failures = 0
                continue
            self._failing[sender.channel.name] = alert.title
            pause_s = RETRY_PAUSES_S[min(failures, len(RETRY_PAUSES_S) - 1)]
            failures += 1
            log.warning("alert channel %s: not taken, again in %g s", sender.channel.name, pause_s)
            await asyncio.sleep(pause_s)

    async def _last_words(self) -> None:
        boxes: list[Outbox[Any]] = [box for _, box in self._letters]
        if self._publisher:
            boxes.append(self._publications)
        with contextlib.suppress(TimeoutError):
            async with asyncio.timeout(LAST_WORDS_S):
                await asyncio.gather(*(box.emptied() for box in boxes))
