"""Devices, links and channels: does each part have its device, each device its place?"""

from __future__ import annotations

from collections.abc import Iterable

from rigd.config.checks.context import RigContext
from rigd.config.checks.identity import report_duplicates
from rigd.config.findings import listed, nearest
from rigd.config.lines import Path
from rigd.config.table import ns

SIMULATED = "simulated"
_FEWEST_PERIODS = 2


def check_devices(context: RigContext) -> None:
    """Who names whom, and what is named by nobody."""
    wanted = tuple(_wanted(context))
    for section, part, device, key in wanted:
        if device not in context.names("devices"):
            message = f"{part} names device {device!r}, which is not declared"
            message += nearest(device, context.names("devices"))
            remedy = f"declared devices: {listed(sorted(context.names('devices')))}"
            context.found.error("device-unknown", context.at(section, part, key), message, remedy)
    _units(context, [(section, part, device) for section, part, device, _ in wanted if section != "sensors"])
    used = {name for _, _, name, _ in wanted}
    for spec in context.rig.devices:
        if spec.id not in used and context.whole("pumps", "valves", "chillers", "cells", "sensors"):
            message = f"no part and no sensor uses device {spec.id!r}"
            place = context.at("devices", spec.id, "id")
            context.found.error("device-unused", place, message, "name it at a part or sensor, or remove it")
        if spec.link not in context.names("links"):
            message = f"no link {spec.link!r}{nearest(spec.link, context.names('links'))}"
            remedy = f"declared links: {listed(sorted(context.names('links')))}"
            context.found.error("link-unknown", context.at("devices", spec.id, "link"), message, remedy)
    _addresses(context)
    _ports(context)
    _channels(context)
    _ages(context)


def _wanted(context: RigContext) -> Iterable[tuple[str, str, str, str]]:
    """(section, part, device, key) of everything that names a device."""
    for section in ("pumps", "valves", "chillers", "cells"):
        for part in getattr(context.file, section):
            if part.device:
                yield section, part.id, part.device, "device"
    for sensor in context.file.sensors:
        yield "sensors", sensor.tag, sensor.device, "device"


def _units(context: RigContext, wanted: list[tuple[str, str, str]]) -> None:
    """One device drives one part."""
    first: dict[str, str] = {}
    for section, part, device in wanted:
        if device in first and first[device] != part:
            message = f"device {device!r} is the one of {first[device]} already"
            remedy = "each pump, valve, chiller and cell has a device of its own"
            context.found.error("device-shared", context.at(section, part, "device"), message, remedy)
        first.setdefault(device, part)


def _addresses(context: RigContext) -> None:
    """Each its own address; only cards may share one, as parts of one device (unlike cards, or unlike parameters)."""
    first: dict[tuple[str, str, str], str] = {}
    for device in context.rig.devices:
        part = str(sorted(device.options.items())) if "card" in device.options else ""
        here = (device.link, device.address, part)
        if here in first:
            what = f"address {device.address!r}" if device.address else "no address"
            message = f"{first[here]} is on link {device.link!r} with {what} too; their answers cannot be told apart"
            remedy = "give each device on a link its own address, or its own link"
            key = "address" if device.address else "link"
            context.found.error("address-taken", context.at("devices", device.id, key), message, remedy)
        first.setdefault(here, device.id)


def _ports(context: RigContext) -> None:
    first: dict[str, str] = {}
    for link in context.rig.links:
        if link.port == SIMULATED:
            continue
        if link.port in first:
            message = f"port {link.port!r} is the one of link {first[link.port]!r} already"
            remedy = "one link per port; devices that share a port share a link"
            context.found.error("port-taken", context.at("links", link.id, "port"), message, remedy)
        first.setdefault(link.port, link.id)
    used = {device.link for device in context.rig.devices}
    for link in context.rig.links:
        if link.id not in used and context.whole("devices"):
            message = f"no device is on link {link.id!r}"
            context.found.warning("link-unused", context.at("links", link.id, "id"), message, "remove it, or use it")


def _channels(context: RigContext) -> None:
    named: list[tuple[str, Path]] = []
    units = {device.unit for device in context.rig.devices}
    told = (tag for tag in context.rig.tags if tag.at in units and tag.id == f"{tag.at}.{tag.channel}")
    own = {(tag.device, tag.channel) for tag in told}
    for sensor in context.file.sensors:
        if sensor.channel.strip() != sensor.channel or " " in sensor.channel:
            message = f"channel {sensor.channel!r} has blanks"
            context.found.error(
                "channel-wrong", (*sensor.key_path, "channel"), message, "write the instrument's own word"
            )
        if (sensor.device, sensor.channel) in own:
            message = f"channel {sensor.channel!r} of {sensor.device} is read by the rig itself already"
            remedy = "use that tag, or name another channel"
            context.found.error("channel-taken", (*sensor.key_path, "channel"), message, remedy)
        named.append((f"{sensor.channel} of {sensor.device}", (*sensor.key_path, "channel")))
    report_duplicates(context.found, "channel", named)


def _ages(context: RigContext) -> None:
    """A value must be read at least twice before it is called too old."""
    for section, name, stale_s, period_ns in _ages_given(context):
        if ns(stale_s) < _FEWEST_PERIODS * period_ns:
            message = f"too old after {stale_s:g} s, but read every {period_ns / 1e9:g} s: one late answer would trip"
            remedy = f"write stale_after = at least {_FEWEST_PERIODS * period_ns / 1e9:g} s, or read more often"
            context.found.error("stale-too-short", context.at(section, name, "stale_after"), message, remedy)


def _ages_given(context: RigContext) -> Iterable[tuple[str, str, float, int]]:
    periods = {tag.id: tag.period_ns for tag in context.rig.tags}
    for sensor in context.file.sensors:
        if sensor.stale_after is not None:
            yield "sensors", sensor.tag, sensor.stale_after, periods[sensor.tag]
    for device in context.file.devices:
        if device.stale_after is not None:
            yield "devices", device.id, device.stale_after, device.period_ns
