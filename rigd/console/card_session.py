"""Trying a protocol card at a device: what is asked, all bytes both ways with times, and the transcript of it."""

from __future__ import annotations

import asyncio
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rigd.console.output import Output

if TYPE_CHECKING:
    from rigd.runtime.line import LinkLine
    from rigd.runtime.transcript import Transcript

HELP = """identify             who is there
prepare              what the daemon does at each start
poll [CHANNEL ...]   read channels
ORDER VALUE          such as: deliver 0.1   stop 0   move 1   set temperature 20   (moves the device)
send WORDS           these words, framed as the card says; shows what comes back
bytes 40 0D          these bytes; also "text\\r" in quotes
quit"""
LISTEN_S = 1.0


@dataclass(frozen=True, slots=True)
class Trial:
    """What is tried where. ``parameters`` and ``address`` as in the rig file; ``baud`` 0: what the card says."""

    file: Path
    port: str
    address: str = ""
    baud: int = 0
    parameters: tuple[tuple[str, str], ...] = ()


class _Listener:
    """Takes whatever comes."""

    def feed(self, data: bytes) -> bytes | None:
        return None


class Session:
    """One device, its line, and the transcript of what was asked of it."""

    def __init__(self, output: Output, trial: Trial, driver: Any, transcript: Transcript) -> None:
        self._output, self._trial, self._driver, self.transcript = output, trial, driver, transcript
        self._start_s = time.monotonic()
        self._line: LinkLine | None = None
        self._keeps = True
        self._card = said(trial.file)
        self._channels = list(self._card["channels"])
        self.readings: dict[str, dict[str, str]] = {}

    async def run(self, acts: Sequence[str], ask: Callable[[], str] | None) -> bool:
        """These acts, then what ``ask`` says until it is empty or "quit"; ``False`` when one of the acts failed."""
        from rigd.adapters.open_link import open_link
        from rigd.runtime.line import LinkLine

        link = await open_link(link_of(self._trial, self._card))
        try:
            self._line = LinkLine(link, name=self._trial.port, timeout_s=LISTEN_S, trace=self._trace)
            good = True
            for what in acts:
                good = good and await self._do(what)
            while ask is not None and (what := (await asyncio.to_thread(ask)).strip()) != "quit":
                await self._one(what)
            return good
        finally:
            await link.close()

    async def _one(self, what: str) -> None:
        word, _, rest = what.partition(" ")
        if word in ("send", "bytes"):
            await self._raw(word, rest)
        elif what in ("help", "?"):
            self._output.people.print(HELP, markup=False)
        elif what:
            await self._do(what)

    async def _do(self, what: str) -> bool:
        from rigd.model.errors import RigError
        from rigd.runtime.transcript import Act, perform

        assert self._line is not None
        self.transcript.acts.append(act := Act(0, what))
        try:
            values = await perform(self._driver, self._line, what, len(self.transcript.acts), self._channels)
        except RigError as error:
            act.error = str(error).partition(": ")[2] or str(error)
            self._say(f"failed: {error}")
            return False
        lasting = {name: value for name, value in values.items() if not self._changes(name)}
        act.values = {name: value for name, value in lasting.items() if value}
        self.readings[what] = values
        for name, value in values.items():
            self._say(f"{name} = {value}")
        self._say("done" if not values else "")
        return True

    def _changes(self, channel: str) -> bool:
        """True for what counts time, and so is not the same when the transcript is held against the card."""
        return bool(dict(self._card["channels"].get(channel, {})).get("integral_of"))

    async def _raw(self, word: str, rest: str) -> None:
        """Bytes that no transcript keeps; what comes back within a second is shown."""
        from rigd.model.errors import RigError
        from rigd.runtime.transcript import bytes_of

        assert self._line is not None
        self._keeps = False
        try:
            data = self._driver.framed(rest) if word == "send" else bytes_of(rest)
            await self._line.ask(data, _Listener())
        except (RigError, ValueError, SyntaxError) as error:
            self._say(str(error))
        finally:
            self._keeps = True

    def _trace(self, sent: bool, data: bytes) -> None:
        if self._keeps and self.transcript.acts:
            self.transcript.acts[-1].said.append((sent, data))
        shown = "".join(chr(byte) if 32 <= byte < 127 else "." for byte in data)
        at_ms = (time.monotonic() - self._start_s) * 1e3
        self._say(f"{at_ms:9.1f} ms {'>' if sent else '<'} {data.hex(' ')}  |{shown}|")

    def _say(self, text: str) -> None:
        self._output.people.print(text, markup=False, highlight=False, soft_wrap=True)


def said(file: Path) -> dict[str, Any]:
    """The tables of a card file."""
    import tomllib

    return tomllib.loads(file.read_text(encoding="utf-8"))


def link_of(trial: Trial, card: dict[str, Any]) -> Any:
    """The port, with the settings of the card."""
    from rigd.model.devices import LinkSpec

    link = card["link"]
    settings = {key: link[key] for key in ("data_bits", "parity", "stop_bits") if key in link}
    return LinkSpec("try", trial.port, baud=trial.baud or link.get("baud", 115_200), **settings)
