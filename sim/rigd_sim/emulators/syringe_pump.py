"""Syringe pump SP2 (sim/MANUAL.md, 1.1): one or two syringes."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from rigd.model.devices import PUMP_CHANNELS, DeviceSpec, PumpState
from rigd.model.orders import Action
from rigd.model.rig import Pump
from rigd.ports.plant import Plant
from rigd_sim.emulators.device import NO_ARGUMENTS, BracketDevice, number_within, told
from rigd_sim.emulators.numbers import fixed

STATES = {
    PumpState.STOPPED: "stopped",
    PumpState.DELIVERING: "delivering",
    PumpState.REFILLING: "filling",
    PumpState.STALLED: "stalled",
    PumpState.EMPTY: "empty",
}
_NOTHING_mL = 1e-4


class SyringePump(BracketDevice):
    """A pump as its firmware shows it; the screw, the liquid and the force are the plant's."""

    model = "SP2"
    commands = frozenset({"rate", "stop", "fill", "swap", "silence"})

    def __init__(self, spec: DeviceSpec, plant: Plant, pump: Pump, pace: float = 1.0) -> None:
        super().__init__(spec, plant, pace)
        self._pump = pump
        self._delivered_before_mL = self._read()["delivered"]

    @property
    def own(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Requests of the pump."""
        motion = {"rate": self._rate, "stop": self._stop, "fill": self._fill, "swap": self._swap}
        return {"bores?": self._bores, "status?": self._status, **motion}

    def broadcast_stop(self) -> None:
        """Stop all motion."""
        self.tell(Action.STOP, 0.0)

    def power_down(self) -> None:
        """The motor stops."""
        self.tell(Action.STOP, 0.0)

    def power_cycle(self, now_s: float, off_s: float) -> None:
        """The motor stops and the counter of delivered volume starts anew."""
        super().power_cycle(now_s, off_s)
        self._delivered_before_mL = self._read()["delivered"]

    def faulty(self) -> bool:
        """True when a channel of the pump carries a fault."""
        return any(reading.fault for reading in self.plant.read(self.spec.id, ("state",)))

    def _read(self) -> dict[str, float]:
        return {reading.channel: reading.value for reading in self.plant.read(self.spec.id, PUMP_CHANNELS)}

    def _state(self) -> PumpState:
        return PumpState(int(self._read()["state"]))

    def _bores(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        pump = self._pump
        return f"ok n={pump.syringes} bore={fixed(pump.bore_mm, 2)} stroke={fixed(pump.stroke_mL, 3)}"

    def _rate(self, words: Sequence[str]) -> str:
        rate, refusal = number_within(words, self._pump.rate_min_mL_min, self._pump.rate_max_mL_min, 4)
        return refusal or self._not_ready() or told(self.tell(Action.DELIVER, rate), "no liquid")

    def _not_ready(self) -> str:
        """Why the pump may not deliver now, or ""."""
        now = self._read()
        state = PumpState(int(now["state"]))
        if state is PumpState.STALLED:
            return "no stalled force limit"
        if state is PumpState.REFILLING and self._pump.syringes == 1:
            return "no state filling"
        if state is PumpState.EMPTY and now["level"] <= _NOTHING_mL and now["standby"] <= _NOTHING_mL:
            return "no state empty"
        return ""

    def _stop(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else told(self.tell(Action.STOP, 0.0))

    def _fill(self, words: Sequence[str]) -> str:
        volume, refusal = number_within(words, 0.0, self._pump.stroke_mL, 3)
        if not refusal and self._pump.syringes == 1 and self._state() in (PumpState.DELIVERING, PumpState.REFILLING):
            refusal = "no state that syringe is moving"
        return refusal or told(self.tell(Action.FILL, volume), "that syringe is moving")

    def _swap(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        if self._pump.syringes == 1:
            return "no state one syringe only"
        if self._read()["standby"] <= _NOTHING_mL:
            return "no state standby is empty"
        return told(self.tell(Action.SWAP, 0.0), "standby is filling")

    def _status(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        now = self._read()
        delivered_mL = max(0.0, now["delivered"] - self._delivered_before_mL)
        return (
            f"ok state={STATES[PumpState(int(now['state']))]} flow={fixed(now['flow'], 4)}"
            f" level={fixed(now['level'], 3)} standby={fixed(now['standby'], 3)}"
            f" delivered={fixed(delivered_mL, 4)} fault={int(self.faulty())}"
        )
