"""Words of the selector valve (manual, 1.2). Pure. On the wire positions count from 1, in rigd from 0."""

from __future__ import annotations

from rigd.model.devices import VALVE_LOST, VALVE_MOVING, WillFrame
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Action
from rigd_drivers.bracket import Words, encode_request, exact_reply, named, ok_reply, whole
from rigd_drivers.common import FLAGS

MODEL = "SV3"
AT, POSITIONS = ("at?",), ("positions?",)
POSITIONS_MAX = 10
REST = 0
"""Index of the position that the valve takes by itself; the maker fixed it."""


def position(words: Words) -> int:
    """``at=2`` as the index of a position, ``VALVE_MOVING`` or ``VALVE_LOST``."""
    (at,) = named(words, "at")
    if at == "?":
        return VALVE_LOST
    place = whole(at)
    if place > POSITIONS_MAX:
        raise ValueError(f"there is no position {place}")
    return place - 1 if place else VALVE_MOVING


def positions(words: Words) -> int:
    """``n=3``"""
    (count,) = named(words, "n")
    return whole(count)


def order_words(action: Action, value: float, count: int) -> Words:
    """A move in the valve's words; ``LocalProtocolError`` for a position that a valve with ``count`` has not."""
    if action is not Action.MOVE:
        raise LocalProtocolError(f"a valve cannot {action.value}")
    if value not in range(count):
        raise LocalProtocolError(f"a valve with {count} positions has none with the index {value:g}")
    return ("to", str(int(value) + 1))


def will_frames(address: int, timeout_s: float) -> tuple[tuple[WillFrame, ...], tuple[WillFrame, ...]]:
    """(move to rest, check). The flags keep numbers from following themselves, as the pump's do."""
    rest = WillFrame(encode_request(address, 0xF0, ("to", str(REST + 1))), exact_reply(address, 0xF0, "ok"), timeout_s)
    flags = WillFrame(encode_request(address, 0xF1, FLAGS), ok_reply(address, 0xF1), timeout_s)
    there = WillFrame(encode_request(address, 0xF2, AT), exact_reply(address, 0xF2, f"ok at={REST + 1}"), timeout_s)
    return (rest,), (flags, there)
