"""Dialogues with one device as text: written down while it is tried, and held against its driver ever after.

    card my-pump.toml
    address 07
    ? deliver 0.25
    > "@07FR 250.0\\r"
    < "#07OK\\r\\n"
    = flow 0.25
    ! out of range

``?`` is what is asked of the driver: ``identify``, ``prepare``, ``poll`` (with channels or all), or an order and its
value. ``>`` and ``<`` are bytes, in quotes with escapes or as hexadecimal pairs (what follows a bar is a comment);
``=`` what must come of it; ``!`` a part of the error that must come of it. Lines that begin with ``#`` are comments.
"""

from __future__ import annotations

import ast
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TypeVar

from rigd.model.errors import DeviceProtocolError, LinkTimeout, RigError
from rigd.model.orders import Action, Authority, Order
from rigd.model.samples import Reading
from rigd.ports.driver import Driver
from rigd.ports.link import Line, ReplyReader

T = TypeVar("T")


@dataclass(slots=True)
class Act:
    """One thing asked of the driver, the bytes that it led to, and what came of it."""

    line: int
    what: str
    said: list[tuple[bool, bytes]] = field(default_factory=list)
    values: dict[str, str] = field(default_factory=dict)
    error: str = ""


@dataclass(slots=True)
class Transcript:
    """All of a file; ``facts`` are its first lines, such as ``card`` and ``address``."""

    facts: dict[str, str] = field(default_factory=dict)
    acts: list[Act] = field(default_factory=list)


def read_transcript(text: str) -> Transcript:
    """The acts of a text; ``RigError`` names the line that cannot be read."""
    found = Transcript()
    for number, line in enumerate(text.splitlines(), 1):
        mark, _, rest = line.strip().partition(" ")
        if not mark or mark.startswith("#"):
            continue
        try:
            _take(found, number, mark, rest.strip())
        except (ValueError, SyntaxError, IndexError) as error:
            raise RigError(f"line {number}: {line.strip()!r} cannot be read: {error}") from None
    return found


def _take(found: Transcript, number: int, mark: str, rest: str) -> None:
    if mark == "?":
        found.acts.append(Act(number, rest))
    elif mark in ("<", ">"):
        found.acts[-1].said.append((mark == ">", bytes_of(rest)))
    elif mark == "=":
        name, _, value = rest.rpartition(" ")
        found.acts[-1].values[name] = value
    elif mark == "!":
        found.acts[-1].error = rest or "."
    elif found.acts:
        raise ValueError("a line begins with ?, >, <, =, ! or #")
    else:
        found.facts[mark] = rest


def bytes_of(text: str) -> bytes:
    """Bytes as a transcript writes them: in quotes with escapes, or hexadecimal pairs; raises ``ValueError``."""
    if text.startswith('"'):
        value = ast.literal_eval(text[: text.rindex('"') + 1])
        return str(value).encode("latin-1")
    return bytes.fromhex(text.partition("|")[0])


def written(transcript: Transcript) -> str:
    """The text of a transcript."""
    lines = [f"{name} {value}" for name, value in transcript.facts.items() if value]
    for act in transcript.acts:
        lines.append(f"? {act.what}")
        lines += [f"{'>' if sent else '<'} {quoted(data)}" for sent, data in act.said]
        lines += [f"= {name} {value}" for name, value in act.values.items()]
        lines += [f"! {act.error}"] if act.error else []
    return "\n".join(lines) + "\n"


def quoted(data: bytes) -> str:
    """Bytes as a transcript writes them."""
    shown = "".join(
        chr(byte) if 32 <= byte < 127 and byte not in b'"\\' else {13: "\\r", 10: "\\n"}.get(byte, f"\\x{byte:02x}")
        for byte in data
    )
    return f'"{shown}"'


def value_of(reading: Reading) -> str:
    """A reading as a transcript writes it."""
    return "bad" if reading.fault else f"{reading.value:.6g}"


class ScriptedLine:
    """The line to a device that says exactly what an act tells; another request than the next one is an error."""

    def __init__(self, act: Act) -> None:
        self._left = list(act.said)

    async def ask(self, request: bytes, reader: ReplyReader[T], *, timeout_s: float | None = None) -> T:
        """The reply that the transcript holds for this request."""
        if not self._left or self._left[0] != (True, request):
            wanted = quoted(self._left[0][1]) if self._left else "nothing more"
            raise Differs(f"sent {quoted(request)}, the transcript has {wanted}")
        self._left.pop(0)
        found = reader.feed(b"")
        while self._left and not self._left[0][0]:
            heard = self._left.pop(0)[1]
            if found is None:
                found = reader.feed(heard)
        if found is None:
            raise LinkTimeout("no reply")
        return found

    @property
    def rest(self) -> str:
        """What was not said, "" when all was."""
        return quoted(self._left[0][1]) if self._left else ""


class Differs(DeviceProtocolError):
    """The driver says something else than the transcript."""


async def differences(driver: Driver, transcript: Transcript, channels: Sequence[str]) -> list[str]:
    """Act by act, what the driver does otherwise; empty when nothing. ``channels`` are those of a bare ``poll``."""
    found = []
    for number, act in enumerate(transcript.acts):
        line = ScriptedLine(act)
        try:
            values, told = await perform(driver, line, act.what, number, channels), ""
        except RigError as error:
            values, told = {}, str(error)
        if act.error and act.error not in told:
            found.append(f"line {act.line}: {act.what}: no error {act.error!r}, but {told or 'none'}")
        elif told and not act.error:
            found.append(f"line {act.line}: {act.what}: {told}")
        elif line.rest:
            found.append(f"line {act.line}: {act.what}: {line.rest} was not sent or not awaited")
        found += [
            f"line {act.line}: {act.what}: {name} is {values.get(name, 'missing')}, the transcript has {value}"
            for name, value in act.values.items()
            if not told and values.get(name) != value
        ]
    return found


async def perform(driver: Driver, line: Line, what: str, number: int, channels: Sequence[str]) -> dict[str, str]:
    """Ask the driver what an act says; ``RigError`` also for what is neither a question nor an order."""
    words = what.split()
    if words[0] == "identify":
        who = await driver.identify(line)
        return {"maker": who.maker, "model": who.model, "serial": who.serial_no, "firmware": who.firmware}
    if words[0] == "prepare":
        return {"restarted": f"{int(await driver.prepare(line))}"}
    if words[0] == "poll":
        return {one.channel: value_of(one) for one in await driver.poll(line, words[1:] or channels)}
    try:
        action, value = Action(" ".join(words[:-1])), float(words[-1])
    except ValueError:
        orders = ", ".join(action.value for action in Action)
        raise RigError(
            f"{what!r} is not identify, prepare, poll, or an order and its value; orders: {orders}"
        ) from None
    await driver.execute(line, Order(number, "unit", action, value, Authority.OPERATOR, "transcript", 0))
    return {}
