"""What stops each device when nobody is left to think: last wills in the order in which the guard sends them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rigd.model.devices import LastWill, LinkSpec
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.model.rig import RigDefinition
from rigd.ports.driver import Driver


def last_wills(rig: RigDefinition, drivers: Mapping[str, Driver], links: Sequence[LinkSpec]) -> list[LastWill]:
    """Pumps first, then valves, baths, what takes the drive power away; devices that move nothing are left out.

    ``ConfigError`` when a device of ``last_resort`` has no last will.
    """
    ranks = [{part.device for part in parts} for parts in (rig.pumps, rig.valves, rig.chillers)]
    rank = {device: number for number, devices in enumerate(ranks) for device in devices}
    rank |= {device: len(ranks) + 1 for device in last_resorts(rig)}
    by_id = {link.id: link for link in links}
    wills = [drivers[device.id].last_will(by_id[device.link]) for device in rig.devices]
    wills = [will for will in wills if will.frames]
    if missing := last_resorts(rig) - {will.device for will in wills}:
        raise ConfigError(tuple(_powerless(device) for device in sorted(missing)))
    return sorted(wills, key=lambda will: rank.get(will.device, len(ranks)))


def last_resorts(rig: RigDefinition) -> frozenset[str]:
    """Devices that take the drive power away."""
    return frozenset(device.id for device in rig.devices if device.last_resort)


def _powerless(device: str) -> Problem:
    return Problem(
        "last-resort-without-will",
        f"{device} is the last resort, but its driver knows nothing that takes the power away",
        "give its protocol card a [stop] with steps and check, or leave last_resort out",
        key=f"devices[{device}].last_resort",
    )
