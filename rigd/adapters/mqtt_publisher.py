"""The MQTT client (aiomqtt): connects, publishes what the outbox holds, connects again. Publishes only.

Facts of the library that shape this file: a client is made anew for each attempt (a cancelled connect leaves its lock
held); TCP_NODELAY avoids 40 ms of delayed acknowledgement; quality 1 is broker to broker only, so the journal stays the
record; a frozen broker is felt through quality 1 time-outs, so the time-out is short.
"""

from __future__ import annotations

import asyncio
import contextlib
import logging
import os
import socket
from typing import Protocol

import aiomqtt

from rigd.model.rig import MqttSpec

log = logging.getLogger(__name__)


class Message(Protocol):
    """What is published."""

    @property
    def topic(self) -> str: ...
    @property
    def payload(self) -> str: ...
    @property
    def qos(self) -> int: ...
    @property
    def retain(self) -> bool: ...


class Box(Protocol):
    """Where messages wait."""

    async def head(self) -> Message: ...
    def sent(self, message: Message) -> None: ...


class MqttPublisher:
    """Publishes from ``box`` for ever; ``status_topic`` carries online, offline (last will) and finished."""

    def __init__(self, spec: MqttSpec, box: Box, status_topic: str, timeout_s: float = 2.0) -> None:
        self._spec = spec
        self._box = box
        self._status = status_topic
        self._timeout_s = timeout_s
        self.connected = False
        self.connections = 0

    async def run(self) -> None:
        """Connect, publish, reconnect with a growing pause of at most 5 s; ends only by cancellation."""
        pause_s = 0.1
        while True:
            try:
                async with self._client() as client:
                    self.connected, pause_s = True, 0.1
                    self.connections += 1
                    await client.publish(self._status, "online", qos=1, retain=True)
                    await self._pump(client)
            except (aiomqtt.MqttError, OSError) as error:
                if self.connected or self.connections == 0:
                    log.warning("broker %s:%s not reached: %s", self._spec.host, self._spec.port, error)
            finally:
                self.connected = False
            await asyncio.sleep(pause_s)
            pause_s = min(pause_s * 2, 5.0)

    async def farewell(self, text: str) -> None:
        """Say on the status topic that this is a clean end; gives up silently after the time-out."""
        with contextlib.suppress(aiomqtt.MqttError, OSError, TimeoutError):
            async with asyncio.timeout(2 * self._timeout_s), self._client() as client:
                await client.publish(self._status, text, qos=1, retain=True)

    def _client(self) -> aiomqtt.Client:
        password = os.environ.get(self._spec.password_env) if self._spec.password_env else None
        return aiomqtt.Client(
            self._spec.host,
            self._spec.port,
            username=self._spec.username or None,
            password=password,
            timeout=self._timeout_s,
            keepalive=self._spec.keepalive_s,
            will=aiomqtt.Will(self._status, "offline", qos=1, retain=True),
            socket_options=((socket.IPPROTO_TCP, socket.TCP_NODELAY, 1),),
        )

    async def _pump(self, client: aiomqtt.Client) -> None:
        while True:
            message = await self._box.head()
            await client.publish(message.topic, message.payload, qos=message.qos, retain=message.retain)
            self._box.sent(message)
