"""Lines with devices on them: bytes in, bytes and their delays out.

``now_s`` is process time; the delays are wall seconds. What a line takes to carry a frame, and a device to think, is
process time: it shrinks when the pace grows, else a paced run would drown in it.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from rigd.model.devices import LinkSpec
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.ports.plant import FaultSpec
from rigd_sim.emulators.bracket import BROADCAST, Request, RequestReader, reply_frame
from rigd_sim.emulators.device import BracketDevice, Device
from rigd_sim.emulators.line_faults import LINE_KINDS, LineFaults, Sending

TURNAROUND_s = 0.001
BITS_PER_BYTE = 10
"""Start bit, 8 data bits, stop bit."""
PLAIN_REQUEST_MAX = 64


class EmulatedLine:
    """One link and everything on it. Any bytes whatever may be fed; none raises."""

    def __init__(self, link: LinkSpec, devices: Sequence[Device], pace: float = 1.0, seed: int = 1) -> None:
        self.link = link
        self.devices = {device.spec.id: device for device in devices}
        self.faults = LineFaults(link.id, seed)
        self._pace = pace
        self._s_per_byte = BITS_PER_BYTE / link.baud

    def feed(self, data: bytes, now_s: float) -> list[Sending]:
        """Take bytes from the master; return what the devices send back."""
        self._supervise(now_s)
        if self._dead(now_s):
            return []
        echo = self.faults.size("line-echo", now_s, self.link.id)
        sendings: list[Sending] = [] if echo is None else [(0.0, data)]
        at_s = len(data) * self._s_per_byte
        for device, frame in self._replies(self.faults.heard(data, now_s), now_s):
            at_s += TURNAROUND_s + len(frame) * self._s_per_byte
            sendings += self.faults.sent(device, at_s / self._pace, frame, now_s)
        return sendings

    def tick(self, now_s: float) -> list[Sending]:
        """Let time pass although nobody spoke: time-outs, restarts, noise."""
        self._supervise(now_s)
        noise = b"" if self._dead(now_s) else self.faults.between(now_s)
        return [(0.0, noise)] if noise else []

    def inject(self, fault: FaultSpec) -> None:
        """Add a fault of this link or of a device on it. Raises ``ConfigError`` for an unknown kind or target."""
        kind = next((kind for kind in LINE_KINDS if kind.kind == fault.kind), None)
        if kind is None:
            known = ", ".join(kind.kind for kind in LINE_KINDS)
            raise _refused("fault-kind", f"no line fault is called {fault.kind!r}", f"one of {known}")
        allowed = [self.link.id] if "a link" in kind.target else []
        allowed += self.devices if "a device" in kind.target else []
        if fault.target not in allowed:
            raise _refused(
                "fault-target", f"{fault.kind} cannot hit {fault.target!r} here", f"one of {', '.join(allowed)}"
            )
        self.faults.add(fault)

    def clear(self, kind: str, target: str) -> None:
        """End all faults of this kind on this target now."""
        self.faults.clear(kind, target)

    def listens(self, device: Device, now_s: float) -> bool:
        """True when a device has power and is not hung."""
        return device.powered(now_s) and not self.faults.deaf(device, now_s)

    def _replies(self, data: bytes, now_s: float) -> Iterable[tuple[str, bytes]]:
        """Device and frame of each reply to the requests that these bytes complete."""
        raise NotImplementedError

    def _dead(self, now_s: float) -> bool:
        return self.faults.size("line-dead", now_s, self.link.id) is not None

    def _supervise(self, now_s: float) -> None:
        for fault in self.faults.due("device-reboot", now_s):
            self.devices[fault.target].power_cycle(now_s, max(0.0, fault.magnitude))
        for device in self.devices.values():
            if self.listens(device, now_s):
                device.supervise(now_s)


class BracketLine(EmulatedLine):
    """A shared line of the bracket protocol."""

    def __init__(self, link: LinkSpec, devices: Sequence[BracketDevice], pace: float = 1.0, seed: int = 1) -> None:
        super().__init__(link, devices, pace, seed)
        self._by_address = {device.address: device for device in devices}
        self._reader = RequestReader()
        self._last: dict[str, tuple[Request, bytes]] = {}

    def _replies(self, data: bytes, now_s: float) -> Iterable[tuple[str, bytes]]:
        for request in self._reader.feed(data):
            if request.address == BROADCAST:
                self._broadcast(request, now_s)
                continue
            device = self._by_address.get(request.address)
            frame = self._answer(device, request, now_s) if device and self.listens(device, now_s) else b""
            if device and frame:
                yield device.spec.id, frame

    def _answer(self, device: BracketDevice, request: Request, now_s: float) -> bytes:
        """One reply. The same request under the same number gets the last reply again and does nothing.

        Another request under the number of the last one is a new request: the manual speaks of a *repeated* one only.
        """
        device.heard(now_s)
        last, frame = self._last.get(device.address, (None, b""))
        if last == request and not device.forgetful:
            return frame
        device.forgetful = False
        body = self.faults.answer(device, request.words, now_s)
        frame = b"" if body is None else reply_frame(request.address, request.number, body)
        self._last[device.address] = (request, frame)
        return frame

    def _broadcast(self, request: Request, now_s: float) -> None:
        if request.words != ("stop",):
            return
        for device in self.devices.values():
            if self.listens(device, now_s) and self.faults.obeys(device, now_s):
                device.broadcast_stop()


class PlainLine(EmulatedLine):
    """A line of the plain protocol with its one device."""

    def __init__(self, link: LinkSpec, device: Device, pace: float = 1.0, seed: int = 1) -> None:
        super().__init__(link, [device], pace, seed)
        self._device = device
        self._text = bytearray()

    def _replies(self, data: bytes, now_s: float) -> Iterable[tuple[str, bytes]]:
        *requests, rest = (bytes(self._text) + data).split(b"\r")
        self._text[:] = rest[: PLAIN_REQUEST_MAX + 1]
        for request in requests:
            body = self._answer(request, now_s) if self.listens(self._device, now_s) else None
            if body is not None:
                yield self._device.spec.id, body.encode("ascii") + b"\r\n"

    def _answer(self, request: bytes, now_s: float) -> str | None:
        text = request.decode("ascii", "replace") if len(request) <= PLAIN_REQUEST_MAX else ""
        return self.faults.answer(self._device, text.split(" "), now_s)


def _refused(code: str, message: str, allowed: str) -> ConfigError:
    return ConfigError((Problem(code, message, f"name {allowed}"),))
