"""Words that every bracket device understands (manual, section 1). Pure."""

from __future__ import annotations

from dataclasses import dataclass

from rigd.model.devices import DeviceIdentity
from rigd_drivers.bracket import Words, bit, named, number

WHO, FLAGS, SEEN, SILENCE = ("who?",), ("flags?",), ("seen",), ("silence?",)
SILENCE_MAX_S = 3600.0


@dataclass(frozen=True, slots=True)
class Flags:
    """``restarted`` since power-on until seen; ``fault`` by the device's own judgement."""

    restarted: bool
    fault: bool


def identity(words: Words) -> DeviceIdentity:
    """``maker model serial firmware [simulated]``; words with "=" are the repeated answer to another question."""
    if (
        len(words) not in (4, 5)
        or any("=" in word or not word for word in words)
        or words[4:] not in ([], ["simulated"])
    ):
        raise ValueError("maker, model, serial and firmware are needed")
    maker, model, serial_no, firmware = words[:4]
    return DeviceIdentity(maker, model, serial_no, firmware, simulated=len(words) == 5)


def flags(words: Words) -> Flags:
    """``restarted=0|1 fault=0|1``"""
    restarted, fault = named(words, "restarted", "fault")
    return Flags(bit(restarted), bit(fault))


def silence_words(silence_s: float) -> Words:
    """Sets the communication time-out [s] in tenths, 0 = none."""
    return ("silence", f"{silence_s:.1f}")


def silence(words: Words) -> float:
    """The communication time-out in force [s]."""
    if len(words) != 1:
        raise ValueError("one number is needed")
    return number(words[0])
