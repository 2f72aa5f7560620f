"""From a rig to its emulated lines."""

from __future__ import annotations

from rigd.model.devices import DeviceSpec, LinkSpec
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem
from rigd.model.rig import RigDefinition
from rigd.ports.plant import Plant
from rigd_sim.emulators.chiller import CirculatingChiller
from rigd_sim.emulators.device import BracketDevice
from rigd_sim.emulators.ir_cell import Grid, IrCell
from rigd_sim.emulators.lines import BracketLine, EmulatedLine, PlainLine
from rigd_sim.emulators.selector_valve import SelectorValve
from rigd_sim.emulators.sensor_module import SensorModule
from rigd_sim.emulators.syringe_pump import SyringePump
from rigd_sim.plant import infrared

PLAIN_DRIVER, PLAIN_DIALECT, BRACKET_DIALECT = "chiller", "plain", "bracket"

GRID = Grid(infrared.POINTS, infrared.START_PER_CM, infrared.STEP_PER_CM)


def emulated_lines(rig: RigDefinition, plant: Plant, pace: float = 1.0, seed: int = 1) -> dict[str, EmulatedLine]:
    """The lines of a rig by link id, all devices just switched on.

    Raises ``ConfigError`` with one problem per device that has no emulator or does not fit on its line.
    """
    problems: list[Problem] = []
    lines: dict[str, EmulatedLine] = {}
    for link in rig.links:
        specs = [spec for spec in rig.devices if spec.link == link.id]
        found = _problems(link, specs)
        problems += found
        if not found:
            lines[link.id] = _line(rig, plant, link, specs, pace, seed)
    if problems:
        raise ConfigError(tuple(problems))
    return lines


def _line(
    rig: RigDefinition, plant: Plant, link: LinkSpec, specs: list[DeviceSpec], pace: float, seed: int
) -> EmulatedLine:
    if any(spec.dialect == PLAIN_DIALECT for spec in specs):
        chiller = next(part for part in rig.chillers if part.device == specs[0].id)
        return PlainLine(link, CirculatingChiller(specs[0], plant, chiller), pace, seed)
    return BracketLine(link, [_bracket_device(rig, plant, spec, pace) for spec in specs], pace, seed)


def _bracket_device(rig: RigDefinition, plant: Plant, spec: DeviceSpec, pace: float) -> BracketDevice:
    if spec.driver == "syringe-pump":
        return SyringePump(spec, plant, next(part for part in rig.pumps if part.device == spec.id), pace)
    if spec.driver == "selector-valve":
        return SelectorValve(spec, plant, next(part for part in rig.valves if part.device == spec.id), pace)
    if spec.driver == "ir-cell":
        return IrCell(spec, plant, next(part for part in rig.cells if part.device == spec.id), GRID, pace)
    return SensorModule(spec, plant, [tag for tag in rig.tags if tag.device == spec.id], pace)


def _problems(link: LinkSpec, specs: list[DeviceSpec]) -> list[Problem]:
    """What keeps these devices from sharing this line, or from being emulated at all."""
    found = [_unknown(spec) for spec in specs if not _known(spec)]
    if any(spec.dialect == PLAIN_DIALECT for spec in specs) and len(specs) > 1:
        found.append(
            Problem(
                "line-shared",
                f"link {link.id!r} carries a device of the plain protocol and {len(specs) - 1} more",
                "give the plain device a link of its own",
            )
        )
    seen: dict[str, str] = {}
    for spec in specs:
        other = seen.setdefault(spec.address, spec.id)
        if other != spec.id:
            message = f"devices {other!r} and {spec.id!r} have the address {spec.address!r} on link {link.id!r}"
            found.append(Problem("address-twice", message, "give each device its own address"))
    return found


def _known(spec: DeviceSpec) -> bool:
    if spec.driver == PLAIN_DRIVER:
        return spec.dialect == PLAIN_DIALECT
    emulated = ("syringe-pump", "selector-valve", "ir-cell", "sensor-module")
    return spec.driver in emulated and spec.dialect == BRACKET_DIALECT


def _unknown(spec: DeviceSpec) -> Problem:
    return Problem(
        "not-emulated",
        f"device {spec.id!r} ({spec.driver}, dialect {spec.dialect!r}) has no emulator",
        "the bench emulates the bracket dialect and, for a chiller, the plain one",
    )
