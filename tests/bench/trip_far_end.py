"""The far end of the trip figure, a process of its own: all devices of the rig on pseudo-terminals, answering at once.

Both times are taken here with one clock: just before the bytes with the bad pressure are written, and just after the
first stop has been read. Lines on stdin steer it, lines of JSON on stdout tell what it saw.
"""

from __future__ import annotations

import json
import os
import selectors
import sys
import time
import tty
from collections.abc import Callable
from copy import copy
from dataclasses import fields
from functools import partial
from pathlib import Path
from typing import Any

if __name__ == "__main__":
    sys.path[0] = str(Path(__file__).resolve().parents[1])

from bench.trip_rig import ECHO, GO, LIVE, PUMPS, SENSORS, STOP, BAD_bar, trip_rig
from fakes.plain_plant import PlainBath, PlainPlant, PlainPump, PlainValve

from rigd.model.devices import PumpState
from rigd.model.rig import RigDefinition
from rigd.model.samples import Reading
from rigd_sim.emulators.assemble import GRID, emulated_lines

QUICK_mL_min = 1e5
TICK_s = 0.02
ECHO_FRAME = b"(3101 ok p1=9.000/23592 p2=1.000/02621)0000\n"
"""As long as the reply that carries a bad pressure."""


class Devices:
    """The emulated lines over a plant without physics. ``still`` freezes the pumps' counters where they are."""

    def __init__(self, rig: RigDefinition) -> None:
        self.pumps = {pump.id: PlainPump(pump.syringes, pump.stroke_mL, QUICK_mL_min) for pump in rig.pumps}
        units: dict[str, Any] = dict(self.pumps)
        units |= {valve.id: PlainValve(travel_s=0.001) for valve in rig.valves}
        units |= {chiller.id: PlainBath() for chiller in rig.chillers}
        owners = {device.id: device.unit for device in rig.devices}
        self.plant = PlainPlant(units, owners, {}, GRID.points, GRID.start_per_cm, GRID.step_per_cm)
        self.lines = emulated_lines(rig, self.plant)
        self.still = False
        self._kept: dict[str, Any] = {}
        self._reads = 0
        self._started_s = time.monotonic()
        self.set_pressure(1.0)

    def set_pressure(self, pressure_bar: float) -> None:
        """What both pressure sensors show; the last digit of the raw code is never twice the same."""
        self._reads += 1
        raw = round(pressure_bar * 2621) + self._reads % 5
        self.plant.inputs = {name: Reading(name, pressure_bar, raw) for name in ("p1", "p2")}
        self.plant.inputs |= {name: Reading(name, 22.0 + 0.01 * (self._reads % 3), 23000) for name in ("t1", "t2")}

    def now_s(self) -> float:
        """Bring the plant to the present, unless it stands still."""
        now_s = time.monotonic() - self._started_s
        if not self.still:
            self.plant.advance(round(now_s * 1e9))
        return now_s

    def delivering(self) -> bool:
        """True when every pump delivers."""
        return all(pump.state is PumpState.DELIVERING for pump in self.pumps.values())

    def stand_still(self) -> None:
        """From now on nothing moves by itself, and ``back`` comes back to this."""
        self.still = True
        self._kept = {name: copy(unit) for name, unit in self.plant.units.items()}

    def back(self) -> None:
        """Let every unit be as it was before the stop: pumps deliver, valves and bath are where they were."""
        for name, kept in self._kept.items():
            for field in fields(kept):
                setattr(self.plant.units[name], field.name, getattr(kept, field.name))


class FarEnd:
    """The devices behind their pseudo-terminals, one selector."""

    def __init__(self, rig: RigDefinition) -> None:
        self.devices = Devices(rig)
        self.pumps_left = 0
        self.armed = False
        self.echoing = False
        self.stands_told = False
        self.asked = 0
        self.sent_ns = 0
        self.first_ns = 0
        self.selector = selectors.DefaultSelector()
        self.masters: dict[str, int] = {}
        names = {}
        for link in rig.links:
            master, slave = os.openpty()
            tty.setraw(slave)
            os.set_blocking(master, False)
            self.masters[link.id], names[link.id] = master, os.ttyname(slave)
            self.selector.register(master, selectors.EVENT_READ, partial(self._heard, link.id))
        self.selector.register(0, selectors.EVENT_READ, self._told)
        say({"ports": names})

    def run(self) -> None:
        """Serve until stdin ends."""
        while True:
            for key, _ in self.selector.select(TICK_s):
                act: Callable[[], None] = key.data
                act()
            self._tick()

    def _tick(self) -> None:
        if self.echoing:
            return
        now_s = self.devices.now_s()
        for link, line in self.devices.lines.items():
            for _, data in line.tick(now_s):
                os.write(self.masters[link], data)
        if not self.stands_told and self.devices.delivering():
            self.stands_told = True
            self.devices.stand_still()
            say({"delivering": True})

    def _told(self) -> None:
        words = os.read(0, 4096).split()
        if not words:
            sys.exit(0)
        for word in words:
            if word in (ECHO.encode(), LIVE.encode()):
                self.echoing, self.asked, self.sent_ns = word == ECHO.encode(), 0, 0
            elif word == GO.encode():
                self.devices.back()
                self.sent_ns = self.first_ns = 0
                self.armed = True

    def _heard(self, link: str) -> None:
        data = os.read(self.masters[link], 65536)
        seen_ns = time.monotonic_ns()
        if self.echoing:
            self._echo(link, seen_ns)
            return
        if link == PUMPS and self.sent_ns and STOP in data:
            self._stopped(seen_ns)
        bad = link == SENSORS and self.armed and b"read? p1" in data
        self.devices.set_pressure(BAD_bar if bad else 1.0)
        replies = b"".join(reply for _, reply in self.devices.lines[link].feed(data, self.devices.now_s()))
        if bad:
            self.armed, self.pumps_left = False, len(self.devices.pumps)
            self.sent_ns = time.monotonic_ns()
        if replies:
            os.write(self.masters[link], replies)

    def _stopped(self, seen_ns: int) -> None:
        self.first_ns = self.first_ns or seen_ns
        self.pumps_left -= 1
        if not self.pumps_left:
            say({"first_ns": self.first_ns - self.sent_ns, "last_ns": seen_ns - self.sent_ns})
            self.sent_ns = 0

    def _echo(self, link: str, seen_ns: int) -> None:
        """A request is answered with a frame, one at a time; whatever comes on the other terminal is the echo."""
        if link == SENSORS:
            self.asked += 1
        elif self.sent_ns:
            say({"first_ns": seen_ns - self.sent_ns})
            self.sent_ns = 0
        if self.asked and not self.sent_ns:
            self.asked -= 1
            self.sent_ns = time.monotonic_ns()
            os.write(self.masters[SENSORS], ECHO_FRAME)


def say(facts: dict[str, Any]) -> None:
    """One line to the near end."""
    os.write(1, json.dumps(facts).encode() + b"\n")


if __name__ == "__main__":
    FarEnd(trip_rig()[0]).run()
