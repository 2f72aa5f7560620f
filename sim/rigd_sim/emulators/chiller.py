"""Circulating chiller CB-1 (sim/MANUAL.md, 2): the plain protocol."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence

from rigd.model.devices import DeviceSpec
from rigd.model.orders import Action
from rigd.model.rig import Chiller
from rigd.model.samples import Reading
from rigd.ports.plant import Plant
from rigd_sim.emulators.device import FIRMWARE, Device
from rigd_sim.emulators.numbers import fixed

POWER_ON_degC = 20.0
_SETTING = re.compile(r"[-+]?\d{1,4}(?:\.\d{1,3})?")


class CirculatingChiller(Device):
    """A bath with two settings, both forgotten without power."""

    agreed = "OK"
    commands = frozenset({"SET", "RUN"})

    def __init__(self, spec: DeviceSpec, plant: Plant, chiller: Chiller) -> None:
        super().__init__(spec, plant)
        self._chiller = chiller
        self.power_down()

    @property
    def handlers(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Requests of the chiller."""
        settings = {"SET": self._set, "RUN": self._run, "BATH": self._bath}
        return {"ID": self._id, "STATUS": self._status, "CLEAR": self._clear, **settings}

    def answer(self, words: Sequence[str]) -> str:
        """Carry out one request and return the line of the reply."""
        handler = self.handlers.get(words[0]) if words else None
        return handler(words[1:]) if handler else "ERR WORD"

    def refusal(self, words: Sequence[str]) -> str:
        """It has no word for an internal fault, so it refuses by the nearest one."""
        return "ERR LEVEL" if words[0] == "RUN" else "ERR RANGE"

    def is_command(self, words: Sequence[str]) -> bool:
        """``SET`` and ``RUN`` alone are questions."""
        return super().is_command(words) and len(words) > 1

    def power_down(self) -> None:
        """Circulation off, set-point back to its start."""
        self.tell(Action.CIRCULATE, 0.0)
        self.tell(Action.SET_TEMPERATURE, POWER_ON_degC)

    def _reading(self, channel: str) -> Reading:
        (reading,) = self.plant.read(self.spec.id, (channel,))
        return reading

    def _id(self, words: Sequence[str]) -> str:
        return "ERR WORD" if words else f"CB-1 {self.serial_no} {FIRMWARE} SIMULATED"

    def _set(self, words: Sequence[str]) -> str:
        if not words:
            return f"SET {fixed(self._reading('setpoint').value, 1)}"
        if len(words) != 1 or not _SETTING.fullmatch(words[0]):
            return "ERR WORD"
        target_degC = round(float(words[0]), 1)
        if not self._chiller.low_degC <= target_degC <= self._chiller.high_degC:
            return "ERR RANGE"
        return "ERR RANGE" if self.tell(Action.SET_TEMPERATURE, target_degC) else "OK"

    def _run(self, words: Sequence[str]) -> str:
        if not words:
            return f"RUN {int(self._reading('circulating').value != 0)}"
        if len(words) != 1 or words[0] not in ("0", "1"):
            return "ERR WORD"
        return "ERR LEVEL" if self.tell(Action.CIRCULATE, float(words[0])) else "OK"

    def _bath(self, words: Sequence[str]) -> str:
        return "ERR WORD" if words else f"BATH {fixed(self._reading('bath').value, 2)}"

    def _status(self, words: Sequence[str]) -> str:
        if words:
            return "ERR WORD"
        said = " ".join(self._reading(channel).fault.lower() for channel in ("bath", "circulating"))
        low = "level" in said
        return f"STATUS {int(self.restarted)}{int(low)}{int(bool(said.strip()) and not low)}"

    def _clear(self, words: Sequence[str]) -> str:
        if words:
            return "ERR WORD"
        self.restarted = False
        return "OK"
