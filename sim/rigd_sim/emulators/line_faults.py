"""Faults of lines and of devices behind lines: what happens to bytes, and devices that misbehave.

Bytes are damaged in both directions where the target is a link; where it is a device, only its replies are. Onset and
duration are process time, like those of the plant's faults. Chance comes from a seed.
"""

from __future__ import annotations

from collections.abc import Sequence
from random import Random

from rigd.ports.plant import FaultKind, FaultSpec
from rigd_sim.emulators.device import Device

Sending = tuple[float, bytes]
"""Wall seconds from now, and what goes out then."""

LINE = "a link, or a device (its replies only)"
DEVICE = "a device"
_CHANCE = "probability per byte, 0 to 1"
_REPLIES = "every channel of the device: late, stale or missing"
_ACTS = "feedback of the unit: it does not follow its orders"

LINE_KINDS: tuple[FaultKind, ...] = (
    FaultKind("line-dead", "cable pulled: no byte passes", "a link", "not used", _REPLIES),
    FaultKind("line-loss", "bytes are lost", LINE, _CHANCE, _REPLIES),
    FaultKind("line-flip", "bits are flipped", LINE, _CHANCE, _REPLIES),
    FaultKind("line-noise", "random bytes before replies and between them", LINE, "bytes at a time", _REPLIES),
    FaultKind("line-double", "replies come twice", LINE, "probability per reply, 0 to 1", _REPLIES),
    FaultKind("line-late", "replies come later", LINE, "delay [wall s]", _REPLIES),
    FaultKind("line-pieces", "replies come in two pieces", LINE, "pause between them [wall s]", _REPLIES),
    FaultKind("line-swapped", "each request gets the reply to the one before it", LINE, "not used", _REPLIES),
    FaultKind("line-echo", "the line gives back what is sent", "a link", "not used", _REPLIES),
    FaultKind("device-silent", "hangs: neither answers nor obeys", DEVICE, "not used", _REPLIES),
    FaultKind("device-mute", "obeys but does not answer", DEVICE, "not used", _REPLIES),
    FaultKind("device-busy", "answers that it is busy", DEVICE, "probability per request, 0 to 1", _REPLIES),
    FaultKind("device-stuck", "repeats old answers to questions", DEVICE, "not used", "every channel: frozen"),
    FaultKind("device-exchanged", "another device of the kind stands in its place", DEVICE, "not used", "identity"),
    FaultKind("device-reboot", "loses power once and starts again", DEVICE, "time without power [s]", _ACTS),
    FaultKind("device-refuses", "refuses every command, a stop too", DEVICE, "not used", _ACTS),
    FaultKind("device-pretends", "says ok to every command, a stop too, and does nothing", DEVICE, "not used", _ACTS),
)

_EXCHANGED_SERIAL = "SIM-exchanged"
_NOISE_CHANCE = 0.1
_NOISE_MAX = 512


class LineFaults:
    """The faults of one link and its devices, and the memory that some of them need."""

    def __init__(self, link: str, seed: int) -> None:
        self._link = link
        self._faults: list[FaultSpec] = []
        self._chance = Random(f"{seed}/{link}")
        self._held: dict[str, bytes] = {}
        self._old: dict[tuple[str, ...], str] = {}

    @property
    def active(self) -> tuple[FaultSpec, ...]:
        """All faults that are under way or still to come."""
        return tuple(self._faults)

    def add(self, fault: FaultSpec) -> None:
        """Add a fault; kind and target were checked by the caller."""
        self._faults.append(fault)

    def clear(self, kind: str, target: str) -> None:
        """End all faults of this kind on this target."""
        self._faults = [fault for fault in self._faults if (fault.kind, fault.target) != (kind, target)]
        self._held.clear()
        self._old.clear()

    def due(self, kind: str, now_s: float) -> list[FaultSpec]:
        """Take out the faults of a kind that happens once, as far as their time has come."""
        due = [fault for fault in self._faults if fault.kind == kind and fault.onset_s <= now_s]
        if due:
            self._faults = [fault for fault in self._faults if fault not in due]
        return due

    def size(self, kind: str, now_s: float, *targets: str) -> float | None:
        """The magnitude of a fault in force now on one of the targets, or ``None``."""
        for fault in self._faults:
            if fault.kind == kind and fault.target in targets and 0 <= now_s - fault.onset_s < fault.duration_s:
                return fault.magnitude
        return None

    def heard(self, data: bytes, now_s: float) -> bytes:
        """What arrives at the devices of what was sent to them."""
        return self._damaged(data, now_s, self._link) if self._faults else data

    def sent(self, device: str, at_s: float, frame: bytes, now_s: float) -> list[Sending]:
        """What arrives at the master of one reply."""
        if not self._faults:
            return [(at_s, frame)]
        here = (self._link, device)
        if self.size("line-swapped", now_s, *here) is not None:
            before, self._held[device] = self._held.get(device, b""), frame
            frame = before
        frame = self._damaged(frame, now_s, *here)
        frame = self._noise(self.size("line-noise", now_s, *here)) + frame
        at_s += max(0.0, self.size("line-late", now_s, *here) or 0.0)
        pieces = self._pieces(at_s, frame, self.size("line-pieces", now_s, *here))
        twice = self.size("line-double", now_s, *here)
        return pieces * 2 if twice is not None and self._chance.random() < twice else pieces

    def between(self, now_s: float) -> bytes:
        """What the master hears although nobody spoke."""
        noise = self.size("line-noise", now_s, self._link) if self._faults else None
        return self._noise(noise) if noise is not None and self._chance.random() < _NOISE_CHANCE else b""

    def answer(self, device: Device, words: Sequence[str], now_s: float) -> str | None:
        """What a device answers under its faults; ``None`` for silence."""
        if not self._faults:
            return device.answer(words)
        body = self._act(device, tuple(words), now_s)
        if self.size("device-exchanged", now_s, device.spec.id) is not None:
            body = body.replace(device.serial_no, _EXCHANGED_SERIAL)
        return None if self.size("device-mute", now_s, device.spec.id) is not None else body

    def deaf(self, device: Device, now_s: float) -> bool:
        """True when a device does not even listen."""
        return self.size("device-silent", now_s, device.spec.id) is not None

    def obeys(self, device: Device, now_s: float) -> bool:
        """True when a command to all devices has an effect on this one."""
        kinds = ("device-silent", "device-refuses", "device-pretends")
        return all(self.size(kind, now_s, device.spec.id) is None for kind in kinds)

    def _act(self, device: Device, words: tuple[str, ...], now_s: float) -> str:
        name = device.spec.id
        busy = self.size("device-busy", now_s, name)
        if busy is not None and device.busy and self._chance.random() < busy:
            return device.busy
        if device.is_command(words):
            if self.size("device-refuses", now_s, name) is not None:
                return device.refusal(words)
            return device.agreed if self.size("device-pretends", now_s, name) is not None else device.answer(words)
        if self.size("device-stuck", now_s, name) is None:
            return device.answer(words)
        return self._old.setdefault((name, *words), device.answer(words))

    def _damaged(self, data: bytes, now_s: float, *targets: str) -> bytes:
        loss, flip = self.size("line-loss", now_s, *targets), self.size("line-flip", now_s, *targets)
        if loss is not None:
            data = bytes(byte for byte in data if self._chance.random() >= loss)
        if flip is not None:
            data = bytes(self._flipped(byte) if self._chance.random() < flip else byte for byte in data)
        return data

    def _flipped(self, byte: int) -> int:
        return byte ^ (1 << self._chance.randrange(8))

    def _noise(self, count: float | None) -> bytes:
        return self._chance.randbytes(int(min(_NOISE_MAX, max(0.0, count)))) if count is not None else b""

    def _pieces(self, at_s: float, frame: bytes, pause_s: float | None) -> list[Sending]:
        if not frame:
            return []
        if pause_s is None or len(frame) < 2:
            return [(at_s, frame)]
        cut = self._chance.randrange(1, len(frame))
        return [(at_s, frame[:cut]), (at_s + max(0.0, pause_s), frame[cut:])]
