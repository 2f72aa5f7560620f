"""How a driver talks to one bracket device: numbers, repetitions, identity, flags.

What may be said twice. A question is repeated under a *new* number, so that the answer belongs to now. An order is
repeated under the *same* number: when only the reply was lost, the device repeats its reply and does nothing twice.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

from rigd.model.devices import DeviceIdentity, DeviceSpec
from rigd.model.errors import (
    DeviceProtocolError,
    DeviceRefused,
    LinkTimeout,
    WrongDevice,
)
from rigd.ports.link import Line
from rigd_drivers import common
from rigd_drivers.bracket import OWN_NUMBERS, BracketReader, DeviceBusy, Words, done, encode_request

T = TypeVar("T")

RETRIES = 2
FLAGS_EVERY = 10
"""Polls between two looks at the flags: a device that lost power for a moment is found after so many."""


class Unsuitable(WrongDevice, DeviceRefused):
    """The device that answers is not the one that the rig file describes."""


class Conversation:
    """The numbered exchanges with the device of one ``DeviceSpec``."""

    def __init__(self, spec: DeviceSpec) -> None:
        self.device = spec.id
        self.address = int(spec.address)
        self._retries = retries(spec)
        self._number = 0
        self._polls = 0
        self._fault = False
        self._restarted = False

    async def ask(self, line: Line, words: Words, decode: Callable[[Words], T], *, timeout_s: float | None = None) -> T:
        """A question; repeated with a new number when no answer came or the device was busy."""
        for left in range(self._retries, -1, -1):
            try:
                return await self._exchange(line, self._next(), words, decode, timeout_s)
            except (LinkTimeout, DeviceBusy):
                if not left:
                    raise
        raise AssertionError("unreachable")

    async def order(self, line: Line, words: Words) -> None:
        """An order; repeated with the same number when no answer came, with a new one when the device was busy."""
        number = self._next()
        for left in range(self._retries, -1, -1):
            try:
                await self._exchange(line, number, words, done, None)
                return
            except LinkTimeout:
                if not left:
                    raise
            except DeviceBusy:
                if not left:
                    raise
                number = self._next()

    async def identify(self, line: Line, model: str) -> DeviceIdentity:
        """Who is there; ``Unsuitable`` for another model.

        Asked again also after a "no" or an odd answer: a predecessor's last request may have had our first number, and
        then the device repeats its reply to that.
        """
        for left in range(max(self._retries, 1), -1, -1):
            try:
                who = await self._exchange(line, self._next(), common.WHO, common.identity, None)
                break
            except (LinkTimeout, DeviceRefused, DeviceProtocolError):
                if not left:
                    raise
        if who.model != model:
            raise Unsuitable(
                f"{self.device}: {who.maker} {who.model} ({who.serial_no}) answers at address {self.address:02d}, but "
                f"a {model} is needed; check the addresses of the devices and the link in the rig file"
            )
        return who

    async def settle_in(self, line: Line, silence_s: float | None) -> bool:
        """Set and read back the communication time-out; True when the device restarted since it was last prepared."""
        restarted = (await self._look(line)).restarted
        self._restarted = False
        if silence_s is not None:
            await self.order(line, common.silence_words(silence_s))
            in_force_s = await self.ask(line, common.SILENCE, common.silence)
            if abs(in_force_s - silence_s) > 0.051:
                raise DeviceProtocolError(
                    f"{self.device}: communication time-out set to {silence_s:g} s, but {in_force_s:g} s is in force"
                )
        return restarted

    async def seen(self, line: Line) -> None:
        """Tell the device that its restart was noticed; the last thing of ``prepare``."""
        await self.order(line, common.SEEN)

    async def watch(self, line: Line) -> str:
        """Every so many polls look at the flags; the device's fault in words, or "".

        Raises ``DeviceProtocolError`` from the moment when a restart was seen until the device is prepared again.
        """
        self._polls += 1
        if self._polls % FLAGS_EVERY == 0:
            self._restarted |= (await self._look(line)).restarted
        if self._restarted:
            raise self.restarted()
        return "the device reports a fault" if self._fault else ""

    def restarted(self) -> DeviceProtocolError:
        """Note that a poll showed a restart; to be raised."""
        self._restarted = True
        return DeviceProtocolError(f"{self.device}: has restarted and lost its settings")

    async def _look(self, line: Line) -> common.Flags:
        flags = await self.ask(line, common.FLAGS, common.flags)
        self._fault = flags.fault
        return flags

    async def _exchange(
        self, line: Line, number: int, words: Words, decode: Callable[[Words], T], timeout_s: float | None
    ) -> T:
        request = encode_request(self.address, number, words)
        try:
            return await line.ask(request, BracketReader(self.address, number, words, decode), timeout_s=timeout_s)
        except (LinkTimeout, DeviceRefused, DeviceProtocolError) as error:
            raise type(error)(f"{self.device}: {error}") from error

    def _next(self) -> int:
        self._number = (self._number + 1) % OWN_NUMBERS
        return self._number


def retries(spec: DeviceSpec) -> int:
    """How often a request is repeated: the fact ``retries``, made from the link's."""
    value = spec.facts.get("retries", RETRIES)
    return value if isinstance(value, int) and value >= 0 else RETRIES
