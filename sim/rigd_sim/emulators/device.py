"""What every emulated device shares: power, identity, flags, communication time-out."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence

from rigd.model.devices import DeviceSpec
from rigd.model.orders import Action
from rigd.ports.plant import Plant
from rigd_sim.emulators.numbers import fixed, read_number

FIRMWARE = "1.0"
SILENCE_MAX_S = 3600.0
NO_ARGUMENTS = "no value takes no value"
REASONS = ("word", "value", "state", "stalled", "fault")

_UNFIT = re.compile(r"[^!-'*-z|~]+")


def word(text: str) -> str:
    """``text`` as one protocol word: no blank, brace or parenthesis.

    >>> word("serial (7) {a}")
    'serial-7-a'
    """
    return _UNFIT.sub("-", text).strip("-") or "none"


class Device:
    """One emulated device over a plant. ``answer`` takes the words of a request and returns the body of the reply.

    Sub-classes fill ``handlers`` (first word -> method that takes the other words) and say what ``power_down`` does
    to the plant. ``commands`` are the words that change something: faults that refuse or pretend act on those.
    ``busy`` is how it says "try later", "" when it cannot. ``forgetful`` is set by a loss of power: it does not know
    what it was asked last.
    """

    agreed = "ok"
    busy = ""
    commands: frozenset[str] = frozenset()

    def __init__(self, spec: DeviceSpec, plant: Plant) -> None:
        self.spec = spec
        self.plant = plant
        self.restarted = True
        self.forgetful = False
        self.now_s = 0.0
        self.serial_no = word(spec.serial_no or f"SIM-{spec.id}")
        self._off_until_s = float("-inf")

    # --- what a request does -------------------------------------------------------------------------------------

    @property
    def handlers(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """First word of a request -> what answers it."""
        raise NotImplementedError

    def answer(self, words: Sequence[str]) -> str:
        """Carry out one request and return the body of the reply."""
        raise NotImplementedError

    def refusal(self, words: Sequence[str]) -> str:
        """How this device words a refusal of these words when it has an internal fault."""
        raise NotImplementedError

    def is_command(self, words: Sequence[str]) -> bool:
        """True for a request that changes something."""
        return bool(words) and words[0] in self.commands

    def broadcast_stop(self) -> None:
        """Obey the stop that is meant for all devices; most have nothing to stop."""

    # --- power and supervision -----------------------------------------------------------------------------------

    def power_cycle(self, now_s: float, off_s: float) -> None:
        """Lose power for ``off_s`` of process time: everything set is forgotten."""
        self.now_s = now_s
        self.power_down()
        self.restarted = self.forgetful = True
        self._off_until_s = now_s + off_s

    def powered(self, now_s: float) -> bool:
        """False while the device is without power or starting."""
        return now_s >= self._off_until_s

    def power_down(self) -> None:
        """What happens to the unit when the device loses power."""

    def heard(self, now_s: float) -> None:
        """A valid frame to this device has come."""

    def supervise(self, now_s: float) -> None:
        """Let time pass: act on a communication time-out."""
        self.now_s = now_s

    def tell(self, action: Action, value: float) -> str:
        """Give a command to the unit; returns "" or the plant's refusal."""
        return self.plant.tell(self.spec.unit, action, value)

    def faulty(self) -> bool:
        """True when the plant says that the instrument is broken."""
        return False


class BracketDevice(Device):
    """The requests that every device of the bracket protocol understands.

    The communication time-out is wall time, like every deadline of a line (DEVELOPERS.md, decision 5); times here are
    process time, so it is stretched by ``pace``.
    """

    model = ""
    busy = "busy"

    def __init__(self, spec: DeviceSpec, plant: Plant, pace: float = 1.0) -> None:
        super().__init__(spec, plant)
        self.address = spec.address.zfill(2)
        self._pace = pace
        self._silence_s = 0.0
        self._heard_s = 0.0
        self._lapsed = False

    @property
    def own(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """The requests of this kind of device only."""
        raise NotImplementedError

    @property
    def handlers(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Common requests and the device's own."""
        common = {"who?": self._who, "flags?": self._flags, "seen": self._seen}
        return {**common, "silence": self._set_silence, "silence?": self._get_silence, **self.own}

    def answer(self, words: Sequence[str]) -> str:
        """Carry out one request and return ``ok ...`` or ``no reason``."""
        handler = self.handlers.get(words[0]) if words else None
        return handler(words[1:]) if handler else f"no word {word(words[0] if words else '')}"

    def refusal(self, words: Sequence[str]) -> str:
        """Internal fault."""
        return "no fault"

    def power_cycle(self, now_s: float, off_s: float) -> None:
        """Lose power: the communication time-out is off again too."""
        super().power_cycle(now_s, off_s)
        self._silence_s = 0.0

    def heard(self, now_s: float) -> None:
        """Restart the communication time-out."""
        self._heard_s = now_s
        self._lapsed = False

    def supervise(self, now_s: float) -> None:
        """Go to the safe state once when no valid frame came for the time set."""
        super().supervise(now_s)
        if self._silence_s and not self._lapsed and now_s - self._heard_s >= self._silence_s * self._pace:
            self._lapsed = True
            self.power_down()

    def _who(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else f"ok bench {self.model} {self.serial_no} {FIRMWARE} simulated"

    def _flags(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else f"ok restarted={int(self.restarted)} fault={int(self.faulty())}"

    def _seen(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        self.restarted = False
        return "ok"

    def _set_silence(self, words: Sequence[str]) -> str:
        seconds, refusal = number_within(words, 0.0, SILENCE_MAX_S, 0)
        self._silence_s = self._silence_s if refusal else seconds
        return refusal or "ok"

    def _get_silence(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else f"ok {fixed(self._silence_s, 1)}"


def told(refusal: str, why: str = "not now") -> str:
    """The reply to a command that the plant took ("") or refused; ``why`` explains a refusal that says only "state"."""
    if not refusal:
        return "ok"
    words = [word(part) for part in refusal.replace(":", " ").split()]
    if words == ["state"]:
        words += why.split()
    return " ".join(["no", *words] if words[0] in REASONS else ["no", "state", *words])


def number_within(words: Sequence[str], low: float, high: float, decimals: int) -> tuple[float, str]:
    """The only word as a number and "", or zero and the refusal."""
    value = read_number(words[0]) if len(words) == 1 else None
    if value is None:
        return 0.0, "no value not a number"
    if not low <= value <= high:
        return 0.0, f"no value {words[0]} not within {fixed(low, decimals)} to {fixed(high, decimals)}"
    return value, ""
