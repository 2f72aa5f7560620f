"""What both ends of the trip figure agree on: the rig, the words on their pipe, the bytes that are timed."""

from __future__ import annotations

from dataclasses import replace

from bench.start_time import CONFIGS, RIG

from rigd.config import load_pair
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition

MS = 1_000_000
SENSORS, PUMPS = "bus-2", "bus-1"
"""Links of the pressure sensors and of the pumps."""
BAD_bar = 9.0
"""Above the limit of the interlock (8 bar)."""
STOP = b" stop}"
"""Ends every stop request of the pumps' protocol, before the checksum."""
ECHO, LIVE, GO = "echo", "live", "go"


def trip_rig() -> tuple[RigDefinition, Recipe]:
    """The example rig, pressures read every 20 ms and tripping without delay: the delay of an interlock is a choice of
    the rig file and not of the daemon."""
    pair = load_pair(RIG, CONFIGS / "recipes" / "demo-sweep.toml")
    assert pair.recipe is not None
    interlocks = tuple(replace(one, on_delay_ns=0) if one.id == "PRESSURE-HIGH" else one for one in pair.rig.interlocks)
    devices = tuple(
        replace(device, channels=tuple(_quick(channel) for channel in device.channels)) for device in pair.rig.devices
    )
    return replace(pair.rig, interlocks=interlocks, devices=devices), pair.recipe


def _quick(channel):  # type: ignore[no-untyped-def]
    return replace(channel, period_ns=20 * MS) if channel.tag.startswith("PT-") else channel
