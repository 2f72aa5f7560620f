"""How much of each liquid was drawn, from the pumps' own counters and the valve positions of the journal."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from rigd.logic.flow_path import Feed, flow_path
from rigd.model.devices import DeviceSpec
from rigd.model.rig import RigDefinition
from rigd.report.data import Trace

Array = NDArray[np.float64]


def used_mL(rig: RigDefinition, traces: Mapping[str, Trace]) -> dict[str, float]:
    """mL drawn of each liquid of the rig file.

    What a pump has drawn is what it delivered plus what its syringes hold more than at the start; each increase is
    booked to the liquid that the feed valve's position gives at that time. Counters that fall (a pump that was switched
    off and on) are not booked.
    """
    used = {liquid.id: 0.0 for liquid in rig.liquids}
    for feed in flow_path(rig).feeds:
        for liquid, volume in _drawn(rig, feed, traces).items():
            used[liquid] = used.get(liquid, 0.0) + volume
    return used


def _drawn(rig: RigDefinition, feed: Feed, traces: Mapping[str, Trace]) -> dict[str, float]:
    counters = [_of(rig, traces, feed.pump, channel) for channel in ("delivered", "level", "standby")]
    delivered = counters[0]
    if delivered is None or delivered.t_s.size < 2:
        return {}
    grid = delivered.t_s
    held = np.zeros_like(grid)
    for counter in counters[1:]:
        if counter is not None and counter.t_s.size:
            held = held + _at(counter, grid)
    steps = np.diff(np.nan_to_num(delivered.value, nan=0.0) + held)
    position = _of(rig, traces, feed.valve, "position") if feed.valve else None
    names = next((valve.positions for valve in rig.valves if valve.id == feed.valve), ("",))
    at = _at(position, grid[1:]) if position is not None and position.t_s.size else np.zeros(len(steps))
    drawn: dict[str, float] = {}
    for index, name in enumerate(names):
        liquid = feed.supply.get(name)
        volume = float(steps[(np.rint(at) == index) & (np.abs(steps) < 1e3)].sum())
        if liquid is not None:
            drawn[liquid] = drawn.get(liquid, 0.0) + max(volume, 0.0)
    return drawn


def _of(rig: RigDefinition, traces: Mapping[str, Trace], unit: str, channel: str) -> Trace | None:
    device: DeviceSpec | None = next((device for device in rig.devices if device.unit == unit), None)
    tag = next((spec.tag for spec in device.channels if spec.channel == channel), "") if device else ""
    return traces.get(tag)


def _at(trace: Trace, grid: Array) -> Array:
    """The last value at or before each time of the grid (the first one before that)."""
    index = np.clip(np.searchsorted(trace.t_s, grid, side="right") - 1, 0, None)
    return np.nan_to_num(trace.value[index], nan=0.0)
