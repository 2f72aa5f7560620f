"""Words of the syringe pump (manual, 1.1). Pure.

Rates are sent with four decimals (0.1 uL/min), volumes with three.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from rigd.model.devices import PumpState, WillFrame
from rigd.model.errors import LocalProtocolError
from rigd.model.orders import Action
from rigd_drivers.bracket import Words, bit, encode_request, exact_reply, named, number, ok_reply, whole
from rigd_drivers.common import FLAGS

MODEL = "SP2"
BORES, STATUS, STOP, SWAP = ("bores?",), ("status?",), ("stop",), ("swap",)

STATES = {
    "stopped": PumpState.STOPPED,
    "delivering": PumpState.DELIVERING,
    "filling": PumpState.REFILLING,
    "stalled": PumpState.STALLED,
    "empty": PumpState.EMPTY,
}


@dataclass(frozen=True, slots=True)
class Bores:
    """What is mounted: number of syringes, bore [mm], stroke volume [mL]."""

    syringes: int
    bore_mm: float
    stroke_mL: float


@dataclass(frozen=True, slots=True)
class Status:
    """The pump now; ``delivered_mL`` counts since power-on."""

    state: PumpState
    flow_mL_min: float
    level_mL: float
    standby_mL: float
    delivered_mL: float
    fault: bool


def bores(words: Words) -> Bores:
    """``n=2 bore=10.30 stroke=5.000``"""
    count, bore, stroke = named(words, "n", "bore", "stroke")
    return Bores(whole(count), number(bore), number(stroke))


def status(words: Words) -> Status:
    """``state=stopped flow=0.0000 level=4.812 standby=5.000 delivered=12.4410 fault=0``"""
    state, flow, level, standby, delivered, fault = named(
        words, "state", "flow", "level", "standby", "delivered", "fault"
    )
    if state not in STATES:
        raise ValueError(f"{state!r} is no state")
    return Status(STATES[state], number(flow), number(level), number(standby), number(delivered), bit(fault))


def order_words(action: Action, value: float) -> Words:
    """An order in the pump's words. A rate of zero is a stop; ``LocalProtocolError`` for what no pump can do."""
    if action is Action.STOP or (action is Action.DELIVER and value == 0):
        return STOP
    if action is Action.SWAP:
        return SWAP
    if not (math.isfinite(value) and 0 < value < 1e6):
        raise LocalProtocolError(f"{action.value} {value:g} is not possible; a positive number is needed")
    if action is Action.DELIVER:
        return ("rate", f"{value:.4f}")
    if action is Action.FILL:
        return ("fill", f"{value:.3f}")
    raise LocalProtocolError(f"a pump cannot {action.value}")


def will_frames(address: int, timeout_s: float) -> tuple[tuple[WillFrame, ...], tuple[WillFrame, ...]]:
    """(stop, check). The flags stand between stop and status so that no number follows itself however these are
    repeated: a repeated number would bring the old answer again."""
    still = rb"state=(?:stopped|empty|stalled) flow=-?0(?:\.0+)? "
    stop = WillFrame(encode_request(address, 0xF0, STOP), exact_reply(address, 0xF0, "ok"), timeout_s)
    flags = WillFrame(encode_request(address, 0xF1, FLAGS), ok_reply(address, 0xF1), timeout_s)
    rest = WillFrame(encode_request(address, 0xF2, STATUS), ok_reply(address, 0xF2, still), timeout_s)
    return (stop,), (flags, rest)
