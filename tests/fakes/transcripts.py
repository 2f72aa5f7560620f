"""Reads tests/transcripts/*.txt and judges answers by them; its checksum is a third, independent one."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from pathlib import Path

FOLDER = Path(__file__).resolve().parents[1] / "transcripts"

_ESCAPE = re.compile(rb"\\(n|r|\\|x[0-9A-Fa-f]{2})")
_PLAIN = {b"n": b"\n", b"r": b"\r", b"\\": b"\\"}
_FRAME = re.compile(rb"\(([^(){}]*)\)([0-9A-F]{4})\r?\n")
_NUMBER = re.compile(r"-?\d+(?:\.\d+)?")


@dataclass(frozen=True, slots=True)
class Exchange:
    """One request and what must come back; ``reply`` is None for "no answer"; ``wait_s`` passes before the request."""

    request: bytes
    reply: bytes | None
    exact: bool
    wait_s: float
    line_no: int


@dataclass(slots=True)
class Dialogue:
    """A device from power-on; see tests/transcripts/README.md for the fields."""

    title: str
    device: str
    given: dict[str, str] = field(default_factory=dict)
    identity: tuple[str, ...] = ()
    only_driver: bool = False
    exchanges: list[Exchange] = field(default_factory=list)


def crc16(data: bytes) -> int:
    """CRC-16 bit by bit, as the manual states it (polynomial 0xA001 reflected, start 0xFFFF)."""
    crc = 0xFFFF
    for byte in data:
        crc ^= byte
        for _ in range(8):
            crc = (crc >> 1) ^ 0xA001 if crc & 1 else crc >> 1
    return crc


def load(name: str) -> list[Dialogue]:
    """All dialogues of ``tests/transcripts/<name>.txt``."""
    dialogues: list[Dialogue] = []
    pending: tuple[bytes, float] | None = None
    wait_s = 0.0
    for line_no, line in enumerate((FOLDER / f"{name}.txt").read_text("ascii").splitlines(), 1):
        mark, _, rest = line.partition(" ")
        if mark == "==":
            dialogues.append(Dialogue(rest, name))
            wait_s = 0.0
        elif mark == "@":
            wait_s += _setting(dialogues[-1], rest)
        elif mark == ">":
            pending, wait_s = (_bytes(rest), wait_s), 0.0
        elif mark in ("<", "<~", "<-"):
            if pending is None:
                raise ValueError(f"{name}.txt:{line_no}: an answer without a request")
            reply = None if mark == "<-" else _bytes(rest)
            dialogues[-1].exchanges.append(Exchange(pending[0], reply, mark == "<", pending[1], line_no))
            pending = None
        elif mark not in ("", "#"):
            raise ValueError(f"{name}.txt:{line_no}: {line!r} is no line of a transcript")
    return dialogues


def names() -> list[str]:
    """The transcripts there are."""
    return sorted(path.stem for path in FOLDER.glob("*.txt"))


def complaint(exchange: Exchange, got: bytes) -> str:
    """Why ``got`` is not the answer that the transcript asks for, or ""."""
    if exchange.reply is None:
        return f"line {exchange.line_no}: silence expected, got {got!r}" if got else ""
    wanted, answered = _words(exchange.reply), _words(got)
    if answered is None or wanted is None:
        return f"line {exchange.line_no}: {got!r} is not one whole, well-checked answer"
    if len(wanted) > 2 and wanted[1] == "no":  # the explanation is free
        wanted, answered = wanted[:3], answered[:3]
    elif not exchange.exact:
        wanted, answered = [_shape(word) for word in wanted], [_shape(word) for word in answered]
    return "" if wanted == answered else f"line {exchange.line_no}: wanted {wanted}, got {answered}"


def _setting(dialogue: Dialogue, text: str) -> float:
    word, *rest = text.split()
    if word == "given":
        dialogue.given = dict(item.split("=", 1) for item in rest)
    elif word == "identity":
        dialogue.identity = tuple(rest)
    elif word == "device":
        dialogue.device = rest[0]
    elif word == "only":
        dialogue.only_driver = True
    elif word == "wait":
        return float(rest[0])
    return 0.0


def _bytes(text: str) -> bytes:
    return _ESCAPE.sub(lambda found: _PLAIN.get(found[1]) or bytes.fromhex(found[1][1:].decode()), text.encode("ascii"))


def _words(answer: bytes) -> list[str] | None:
    if not answer.startswith(b"("):
        return answer.decode("ascii", "replace").split(" ") if answer.endswith(b"\r\n") else None
    frame = _FRAME.fullmatch(answer)
    if frame is None or int(frame[2], 16) != crc16(answer[: answer.rindex(b")") + 1]):
        return None
    return frame[1].decode("ascii", "replace").split(" ")


def _shape(word: str) -> str:
    name, equals, value = word.partition("=")
    if name == "data":
        return f"data={len(value)}"
    if equals and name == "state":
        return word
    return _NUMBER.sub("0", word) if not equals else f"{name}={_NUMBER.sub('0', value)}"
