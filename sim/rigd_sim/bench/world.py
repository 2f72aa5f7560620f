"""The plant, its lines and process time, without any port: what a server moves along."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.ports.plant import EmulatedLine, FaultKind, FaultSpec, Plant

TICK_wall_s = 0.05
"""Lines and plant move at least this often, so that time-outs act although nobody talks."""

Arrival = tuple[str, float, bytes]
"""Link, wall seconds from now, and what comes out of it then."""


class World:
    """Process time is wall time since the start times ``pace``."""

    def __init__(
        self,
        plant: Plant,
        lines: Mapping[str, EmulatedLine],
        devices: Mapping[str, str],
        plant_kinds: Sequence[FaultKind],
        line_kinds: Sequence[FaultKind],
        pace: float = 1.0,
    ) -> None:
        self.kinds = (*plant_kinds, *line_kinds)
        self._plant = plant
        self._lines = lines
        self._links = {**devices, **{link: link for link in lines}}
        self._line_kinds = {kind.kind for kind in line_kinds}
        self._pace = pace
        self._ticked_s = 0.0
        self._faults: list[FaultSpec] = []
        self.now_s = 0.0

    def advance(self, wall_s: float) -> list[Arrival]:
        """Move to ``wall_s`` seconds since the start; in slices, so that a stalled server misses no time-out."""
        target_s = max(self.now_s, wall_s * self._pace)
        slice_s = TICK_wall_s * self._pace
        arrivals: list[Arrival] = []
        while self.now_s < target_s:
            self.now_s = min(target_s, self._ticked_s + slice_s)
            self._plant.advance(round(self.now_s * 1e9))
            if self.now_s >= self._ticked_s + slice_s:
                self._ticked_s = self.now_s
                arrivals += self._tick()
        return arrivals

    def feed(self, link: str, data: bytes) -> list[Arrival]:
        """Bytes from the master, at the present time."""
        return [(link, delay_s, reply) for delay_s, reply in self._lines[link].feed(data, self.now_s)]

    def inject(self, fault: FaultSpec) -> None:
        """Add a fault to the plant or to a line. ``ConfigError`` for an unknown kind or target."""
        if fault.kind not in {kind.kind for kind in self.kinds}:
            known = ", ".join(kind.kind for kind in self.kinds)
            raise ConfigError((Problem("fault-kind", f"there is no fault {fault.kind!r}", f"name one of {known}"),))
        if fault.kind in self._line_kinds:
            self._line_of(fault.target).inject(fault)
        else:
            self._plant.inject(fault)
        self._faults.append(fault)

    def clear(self, kind: str, target: str) -> int:
        """End all faults of this kind on this target; returns how many there were."""
        ended = [fault for fault in self._faults if (fault.kind, fault.target) == (kind, target)]
        if ended and kind in self._line_kinds:
            self._line_of(target).clear(kind, target)
        elif ended:
            self._plant.clear(kind, target)
        self._faults = [fault for fault in self._faults if fault not in ended]
        return len(ended)

    def faults(self) -> Iterator[FaultSpec]:
        """Faults in force or still to come."""
        return (fault for fault in self._faults if self.now_s < fault.onset_s + fault.duration_s)

    def truth(self) -> Mapping[str, float]:
        """True state of the plant."""
        return self._plant.truth()

    def _line_of(self, target: str) -> EmulatedLine:
        link = self._links.get(target)
        if link is None:
            message = f"there is no link or device {target!r}"
            raise ConfigError((Problem("fault-target", message, f"name one of {', '.join(sorted(self._links))}"),))
        return self._lines[link]

    def _tick(self) -> list[Arrival]:
        return [(link, delay_s, data) for link, line in self._lines.items() for delay_s, data in line.tick(self.now_s)]
