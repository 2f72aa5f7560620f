"""Selector valve SV3 (sim/MANUAL.md, 1.2)."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from rigd.model.devices import VALVE_LOST, VALVE_MOVING, DeviceSpec
from rigd.model.orders import Action
from rigd.model.rig import Valve
from rigd.ports.plant import Plant
from rigd_sim.emulators.device import NO_ARGUMENTS, BracketDevice, told
from rigd_sim.emulators.numbers import read_count

REST = 1


class SelectorValve(BracketDevice):
    """A motor valve. It rests in position 1, which the rig file must therefore name as the rest of the valve."""

    model = "SV3"
    commands = frozenset({"to", "silence"})

    def __init__(self, spec: DeviceSpec, plant: Plant, valve: Valve, pace: float = 1.0) -> None:
        super().__init__(spec, plant, pace)
        self._positions = len(valve.positions)

    @property
    def own(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Requests of the valve."""
        return {"to": self._to, "at?": self._at, "positions?": self._count}

    def power_down(self) -> None:
        """The return spring moves it to rest."""
        self.tell(Action.MOVE, REST - 1)

    def faulty(self) -> bool:
        """True when the position encoder is broken."""
        return any(reading.fault for reading in self.plant.read(self.spec.id, ("position",)))

    def _to(self, words: Sequence[str]) -> str:
        position = read_count(words[0]) if len(words) == 1 else None
        if position is None:
            return "no value not a number"
        if not 1 <= position <= self._positions:
            return f"no value {position} not within 1 to {self._positions}"
        return told(self.tell(Action.MOVE, position - 1))

    def _at(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        (reading,) = self.plant.read(self.spec.id, ("position",))
        if reading.fault or reading.value == VALVE_LOST:
            return "ok at=?"
        return f"ok at={0 if reading.value == VALVE_MOVING else int(reading.value) + 1}"

    def _count(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else f"ok n={self._positions}"
