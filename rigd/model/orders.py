"""Orders to the rig, requests from people, and what became of them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import IntEnum, StrEnum


class Action(StrEnum):
    """What a rig part can be told. ``value`` of the order in brackets."""

    DELIVER = "deliver"  # pump [mL/min]: deliver at this rate, from rest or as a change of rate
    STOP = "stop"  # pump: stop now
    FILL = "fill"  # pump [mL]: draw from the inlet until this much is in the filling syringe
    SWAP = "swap"  # pump with two syringes: change over to the other one now
    MOVE = "move"  # valve [index of position]
    SET_TEMPERATURE = "set temperature"  # chiller [degC]
    CIRCULATE = "circulate"  # chiller [1 or 0]: circulation pump (and thermostat) on or off


class Authority(IntEnum):
    """Who speaks; the higher wins. Equal to the trade's rule that a stop beats everything below it."""

    OPERATOR = 1
    SEQUENCE = 2
    HOLD = 3
    QUENCH = 4
    CUT = 5


@dataclass(frozen=True, slots=True)
class Order:
    """One command to one unit. ``number`` counts up within a run; ``source`` is the rule or phase that asked."""

    number: int
    unit: str
    action: Action
    value: float
    authority: Authority
    source: str
    t_ns: int


class Result(StrEnum):
    """What became of an order."""

    DONE = "done"
    REFUSED = "refused"
    FAILED = "failed"
    SUPERSEDED = "superseded"


@dataclass(frozen=True, slots=True)
class Outcome:
    """The answer to an order, given by the device task (live) or the plant (dry)."""

    order_number: int
    unit: str
    action: Action
    result: Result
    t_ns: int
    detail: str = ""


class Verb(StrEnum):
    """What a person, or a program for a person, may ask through the door."""

    START = "start"
    HOLD = "hold"
    RESUME = "resume"
    STOP = "stop"  # quench: reagents off, solvent flush, then rest
    CUT = "cut"  # everything stops at once
    RESET = "reset"
    ACKNOWLEDGE = "acknowledge"
    BYPASS = "bypass"
    END_BYPASS = "end bypass"
    SHELVE = "shelve"  # hide an alarm for a time
    UNSHELVE = "unshelve"
    REMOVE = "take out of service"  # hide an alarm until it is returned
    RETURN = "return to service"
    CONFIRM = "confirm"  # sign a checklist item or answer a prompt


@dataclass(frozen=True, slots=True)
class Request:
    """A wish; the core answers each with exactly one ``RequestAnswered`` event, also when it refuses.

    ``target`` is an interlock, alarm, checklist item or prompt id ("*" for all where that makes sense);
    ``args`` holds e.g. ``reason`` and ``duration_s`` of a bypass or of shelving.
    """

    id: str
    verb: Verb
    who: str
    t_ns: int
    target: str = ""
    args: Mapping[str, str | float] = field(default_factory=dict)


class Stop(IntEnum):
    """The stop in force; the maximum of all causes wins, and only a reset comes back down."""

    NONE = 0
    HOLD = 1
    QUENCH = 2
    CUT = 3
