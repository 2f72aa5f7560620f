"""Words of the sensor module (manual, 1.3). Pure. Pressures in bar (gauge), temperatures in degC."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from rigd.model.errors import LocalProtocolError
from rigd.model.samples import Reading
from rigd_drivers.bracket import Words, named, number, whole

MODEL = "PT4"
CHANNELS = ("p1", "p2", "p3", "p4", "t1", "t2", "t3", "t4")
UNITS = {"p": "bar", "t": "degC"}
FAULTS = {"OPEN": "broken sensor", "LOW": "below the converter", "HIGH": "above the converter"}


@dataclass(frozen=True, slots=True)
class Span:
    """What the converter can show, in ``unit``."""

    low: float
    high: float
    unit: str


def read_words(channels: Sequence[str]) -> Words:
    """Asks for these inputs at once; ``LocalProtocolError`` for one that no module has."""
    for channel in channels:
        if channel not in CHANNELS:
            raise LocalProtocolError(f"a sensor module has no channel {channel!r}; it has {', '.join(CHANNELS)}")
    return ("read?", *channels)


def readings(words: Words, channels: Sequence[str]) -> list[Reading]:
    """``p1=0.412/10244 t1=OPEN/0``: one reading for each input asked for; a broken one is not a number."""
    return [_reading(channel, text) for channel, text in zip(channels, named(words, *channels), strict=True)]


def span(words: Words) -> Span:
    """``low=0.000 high=25.000 unit=bar``"""
    low, high, unit = named(words, "low", "high", "unit")
    return Span(number(low), number(high), unit)


def _reading(channel: str, text: str) -> Reading:
    value, slash, code = text.partition("/")
    if not slash:
        raise ValueError(f"{text!r} lacks the raw code")
    if value in FAULTS:
        return Reading(channel, math.nan, whole(code), f"{value}: {FAULTS[value]}")
    return Reading(channel, number(value), whole(code))
