"""Sensor module PT4 (sim/MANUAL.md, 1.3): four pressure and four temperature inputs."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence

from rigd.model.devices import DeviceSpec
from rigd.model.rig import Tag
from rigd.model.samples import Reading
from rigd.ports.plant import Plant
from rigd_sim.emulators.device import BracketDevice, word
from rigd_sim.emulators.numbers import fixed

INPUTS = ("p1", "p2", "p3", "p4", "t1", "t2", "t3", "t4")
CODE_MAX = 65535
_UNWIRED_SPANS = {"p": (0.0, 25.0), "t": (-50.0, 150.0)}
_CODES = {"OPEN": 0, "LOW": 0, "HIGH": CODE_MAX}


class SensorModule(BracketDevice):
    """Converter inputs. An input that the rig does not wire reads ``OPEN``, as a real one would."""

    model = "PT4"
    commands = frozenset({"silence"})

    def __init__(self, spec: DeviceSpec, plant: Plant, tags: Sequence[Tag], pace: float = 1.0) -> None:
        super().__init__(spec, plant, pace)
        self._spans = {tag.channel: (tag.low, tag.high) for tag in tags if tag.channel in INPUTS}

    @property
    def own(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Requests of the module."""
        return {"read?": self._values, "span?": self._span}

    def _values(self, words: Sequence[str]) -> str:
        if not words:
            return "no value no input named"
        for name in words:
            if name not in INPUTS:
                return f"no value {word(name)}"
        wired = [name for name in dict.fromkeys(words) if name in self._spans]
        seen = {reading.channel: reading for reading in self.plant.read(self.spec.id, wired)} if wired else {}
        return "ok " + " ".join(f"{name}={self._show(name, seen.get(name))}" for name in words)

    def _show(self, name: str, reading: Reading | None) -> str:
        """Value and raw code, or the word for a value that there is not."""
        if reading is None:
            return "OPEN/0"
        low, high = self._spans[name]
        if reading.fault or not math.isfinite(reading.value):
            state = _state_word(reading, low)
            return f"{state}/{_CODES[state]}"
        raw = reading.raw if reading.raw is not None else _code(reading.value, low, high)
        return f"{fixed(reading.value, 3 if name.startswith('p') else 2)}/{raw}"

    def _span(self, words: Sequence[str]) -> str:
        name = words[0] if len(words) == 1 else ""
        if name not in INPUTS:
            return f"no value {word(name)}"
        low, high = self._spans.get(name, _UNWIRED_SPANS[name[0]])
        unit = "bar" if name.startswith("p") else "degC"
        return f"ok low={fixed(low, 3)} high={fixed(high, 3)} unit={unit}"


def _state_word(reading: Reading, low: float) -> str:
    """Which of the three words fits the plant's words for the fault."""
    said = reading.fault.upper()
    for state in _CODES:
        if state in said:
            return state
    if not math.isfinite(reading.value):
        return "OPEN"
    return "LOW" if reading.value < low else "HIGH"


def _code(value: float, low: float, high: float) -> int:
    """Converter code of a value when the plant gives none: the span over the whole converter."""
    return min(CODE_MAX, max(0, round((value - low) / (high - low) * CODE_MAX)))
