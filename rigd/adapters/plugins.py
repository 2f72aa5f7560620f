"""Plug-ins by entry point: driver families, plants and simulators. Errors name the package that is to blame."""

from __future__ import annotations

from functools import cache
from importlib.metadata import EntryPoint, entry_points
from typing import TypeVar

from rigd.model.errors import PluginError
from rigd.ports.driver import CONTRACT, DriverFamily
from rigd.ports.plant import PlantMaker, PropertyLibrary, SimulatorMaker

T = TypeVar("T")

DRIVERS, PLANTS, SIMULATORS, PROPERTIES = "rigd.drivers", "rigd.plants", "rigd.simulators", "rigd.properties"


def driver_family(name: str) -> DriverFamily:
    """The family registered as ``name``; ``PluginError`` when it is missing, broken or of another contract."""
    family = _load(DRIVERS, name, DriverFamily)
    if family.contract != CONTRACT:
        raise PluginError(
            f"driver {name!r} ({_origin(DRIVERS, name)}) is written for driver contract {family.contract}, this rigd "
            f"has contract {CONTRACT}; install a matching version"
        )
    return family


def driver_families() -> list[tuple[str, str, str]]:
    """(name, title, origin) of all installed families; a broken one has its error as title."""
    found = []
    for name in _entries(DRIVERS):
        try:
            title = driver_family(name).title
        except PluginError as error:
            title = f"broken: {error}"
        found.append((name, title, _origin(DRIVERS, name)))
    return found


def plant_maker(name: str = "simulated") -> PlantMaker:
    """The simulated plant registered as ``name``."""
    return _load(PLANTS, name, PlantMaker)


def property_library(name: str = "simulated") -> PropertyLibrary:
    """The library of liquid properties registered as ``name``."""
    return _load(PROPERTIES, name, PropertyLibrary)


def simulator_maker(name: str = "simulated") -> SimulatorMaker:
    """The simulator registered as ``name``."""
    return _load(SIMULATORS, name, SimulatorMaker)


@cache
def _entries(group: str) -> dict[str, EntryPoint]:
    return {entry.name: entry for entry in sorted(entry_points(group=group), key=lambda entry: entry.name)}


def _origin(group: str, name: str) -> str:
    entry = _entries(group)[name]
    package = entry.dist.name if entry.dist is not None else "unknown package"
    return f"package {package}, {entry.value}"


def _load(group: str, name: str, kind: type[T]) -> T:
    entry = _entries(group).get(name)
    if entry is None:
        known = ", ".join(_entries(group)) or "none"
        raise PluginError(f"no plug-in {name!r} in group {group} (installed: {known}); install the package that has it")
    try:
        thing = entry.load()
    except Exception as error:  # a stranger's package may fail in any way while it is imported
        reason = f"{type(error).__name__}: {error}"
        raise PluginError(f"plug-in {name!r} ({_origin(group, name)}) cannot be loaded: {reason}") from error
    if not isinstance(thing, kind):
        raise PluginError(
            f"plug-in {name!r} ({_origin(group, name)}) is a {type(thing).__name__}, not a {kind.__name__} as group "
            f"{group} asks for"
        )
    return thing
