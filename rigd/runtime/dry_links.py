"""What the dry shell's devices say of their links: there are no bytes, but a device can be silent or lose its power."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence

from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.samples import Reading
from rigd.ports.plant import NO_ANSWER
from rigd.runtime.link_state import MISSES_TO_FAIL

SIMULATED = DeviceIdentity(maker="rigd", model="simulated", serial_no="0", simulated=True)


class DryLinks:
    """Counts the polls that each device left unanswered, as the live shell does: the first degrades, ``MISSES_TO_FAIL``
    in a row fail, an answer brings it back. ``restarts`` tells which devices lost power since it was last asked."""

    def __init__(self, devices: Iterable[str], restarts: Callable[[], Sequence[str]]) -> None:
        self._news = [DeviceStatus(device, LinkState.ONLINE, 0, identity=SIMULATED) for device in devices]
        self._misses: dict[str, int] = {}
        self._restarts = restarts

    def heard(self, device: str, readings: Sequence[Reading], now_ns: int) -> Sequence[Reading]:
        """The readings of an answered poll; none when the device did not answer."""
        if readings and readings[0].fault == NO_ANSWER:
            self._missed(device, now_ns)
            return ()
        if self._misses.pop(device, 0):
            self._tell(device, LinkState.ONLINE, now_ns)
        return readings

    def news(self, now_ns: int) -> tuple[DeviceStatus, ...]:
        """What has changed since the last time, in order."""
        for device in self._restarts():
            self._tell(device, LinkState.ONLINE, now_ns, power_cycled=True)
        if not self._news:
            return ()
        told, self._news = tuple(self._news), []
        return told

    def _missed(self, device: str, now_ns: int) -> None:
        self._misses[device] = misses = self._misses.get(device, 0) + 1
        if misses <= MISSES_TO_FAIL:
            self._tell(device, LinkState.FAILED if misses == MISSES_TO_FAIL else LinkState.DEGRADED, now_ns, NO_ANSWER)

    def _tell(self, device: str, state: LinkState, now_ns: int, detail: str = "", power_cycled: bool = False) -> None:
        self._news.append(DeviceStatus(device, state, now_ns, detail, SIMULATED, power_cycled))
