"""What a watcher knows of a run: built up from the door's messages by a pure function."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

EVENTS_KEPT = 200

Message = Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Told:
    """One event as the door tells it."""

    kind: str
    subject: str
    t_s: float
    text: str
    fields: Message = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Watched:
    """The newest snapshot, the last events, and how it ended ("" while it goes on)."""

    snapshot: Message = field(default_factory=dict)
    events: tuple[Told, ...] = ()
    end: str = ""
    exit_code: int = 0


def heard(state: Watched, message: Message) -> Watched:
    """The state after one message (``rigd.ports.door``); unknown messages change nothing."""
    says = message.get("say")
    if says == "snapshot":
        return replace(state, snapshot={key: value for key, value in message.items() if key != "say"})
    if says == "event":
        return replace(state, events=(*state.events, told(message))[-EVENTS_KEPT:])
    if says == "end":
        return replace(state, end=str(message.get("outcome", "ended")), exit_code=int(message.get("exit", 0)))
    return state


def told(message: Message) -> Told:
    """The event in a message."""
    inner = message.get("event")
    event: Message = inner if isinstance(inner, Mapping) else message
    t_s = float(event["t_ns"]) / 1e9 if "t_ns" in event else float(event.get("t_s", 0.0))
    fields = event.get("fields")
    texts = [str(event.get(key, "")) for key in ("kind", "subject", "text")]
    return Told(texts[0], texts[1], t_s, texts[2], fields if isinstance(fields, Mapping) else {})
