"""What ``rigd calibrate`` works out from what a person typed: densities, lines through points, moments, tables."""

from __future__ import annotations

import csv
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.output import Output
from rigd.model.units import UnitError, parse_quantity

if TYPE_CHECKING:
    from rich.table import Table

    from rigd.analysis.gravimetric import Delivered
    from rigd.analysis.residence import Spread
    from rigd.model.calibration import Calibrated
    from rigd.model.rig import RigDefinition

DENSITY_KNOWN = 0.001
"""Half-width, as a share, to which a density from a property set is believed (proposal; no source)."""
WATER_KNOWN = 1e-5
"""The same of pure water by the formula, in g/mL; dissolved air alone makes 3e-6."""


def asked_masses(output: Output, pump: str, ordered_mL: float) -> tuple[float, ...]:
    """Ask a person for one weighing after the other until an empty line; what cannot be read is asked again."""
    output.errors.print(
        f"Let {pump} deliver {ordered_mL:g} mL into the tared vessel, wait for the last drop, type the mass with its "
        "unit; tare, and again. An empty line ends it."
    )
    masses: list[float] = []
    while True:
        text = click.prompt(f"mass {len(masses) + 1}", default="", show_default=False, err=True)
        if not text.strip():
            return tuple(masses)
        try:
            masses.append(parse_quantity(text, "mass"))
        except UnitError as error:
            output.errors.print(str(error))
            continue
        if len(masses) > 1:
            mean_g = sum(masses) / len(masses)
            output.errors.print(f"mean {mean_g:.5g} g, scatter {scatter(tuple(masses)) / mean_g:.2%}")


def density_of(
    rig: RigDefinition, liquid: str, liquid_degC: float, given: float | None, within: float | None
) -> tuple[float, float, float, str]:
    """(g/mL, its standard uncertainty, change per kelvin, where it is from)."""
    from rigd.adapters.plugins import property_library
    from rigd.analysis.gravimetric import at_temperature, water_g_mL
    from rigd.analysis.uncertainty import rectangular
    from rigd.model.rig import LiquidRole

    if given is not None:
        return given, rectangular(within if within is not None else DENSITY_KNOWN * given), 0.0, "as given"
    named = [one for one in rig.liquids if one.id == liquid or (not liquid and one.role is LiquidRole.SOLVENT)]
    if not named:
        raise click.UsageError(f"the rig has no liquid {liquid!r}; it has {', '.join(one.id for one in rig.liquids)}")
    if named[0].role is not LiquidRole.SOLVENT:
        raise click.UsageError(
            f"{named[0].id} has the properties of its main solvent only; tell its own --density, or weigh the solvent"
        )
    name = named[0].properties
    if name == "water":
        slope = water_g_mL(liquid_degC + 0.5) - water_g_mL(liquid_degC - 0.5)
        return water_g_mL(liquid_degC), within or WATER_KNOWN, slope, "water, Tanaka et al. 2001"
    (properties,) = (one for one in property_library().sets(rig) if one.id == name)
    density, slope = at_temperature(properties.density_g_mL, liquid_degC)
    half = within if within is not None else DENSITY_KNOWN * density
    return density, rectangular(half), slope, f"{name}, {properties.source}"


def line_through(pairs: list[tuple[float, float]], gain: float, span: float) -> tuple[float, float]:
    """(gain, zero) through (true, raw) at one point, with the gain as it was, or at two."""
    if len(pairs) == 2:
        (true, shown), (true_high, shown_high) = pairs
        if abs(true_high - true) < 0.2 * span or shown_high == shown:
            raise click.UsageError(f"zero and span are too near to each other; take them {0.2 * span:g} or more apart")
        gain = (true_high - true) / (shown_high - shown)
    true, shown = pairs[0]
    zero = shown - true / gain
    if not 0.8 <= gain <= 1.25 or abs(zero) > 0.2 * span:
        raise click.UsageError(f"gain {gain:.3f} and zero {zero:.4g} are no matter of calibration: look at the sensor")
    return gain, zero


def moments(path: Path, is_step: bool) -> Spread:
    from rigd.analysis.tracer import pulse, step

    try:
        with path.open(encoding="utf-8", newline="") as file:
            rows = [row for row in csv.reader(file) if len(row) >= 2]
    except (OSError, UnicodeDecodeError) as error:
        raise ValueError(f"{path} cannot be read: {error}") from None
    first = next((n for n, row in enumerate(rows) if _is_number(row[0])), len(rows))
    try:
        times, signal = zip(*((float(row[0]), float(row[1])) for row in rows[first:]), strict=True)
    except ValueError:
        raise ValueError(f"{path}: two columns of numbers are needed, seconds and signal") from None
    return (step if is_step else pulse)(times, signal)


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def drawn_mL(rig: RigDefinition, segment: str) -> float:
    from rigd.logic.flow_path import flow_path

    path = flow_path(rig)
    known: dict[str, float] = {one.id: one.volume_mL for one in path.trunk}
    known |= {one.id: one.volume_mL for feed in path.feeds for one in (*feed.inlet, *feed.outlet)}
    known |= {line.segment.id: line.volume_mL for line in path.supply_lines}
    known |= {one.id: one.volume_mL for outlet in path.outlets.values() for one in outlet.segments}
    unknown = [name for name in segment.split("+") if name not in known]
    if unknown:
        raise click.UsageError(f"no part {unknown[0]!r} to flow through; there are {', '.join(sorted(known))}")
    return sum(known[name] for name in segment.split("+"))


def scatter(values: tuple[float, ...]) -> float:
    from statistics import stdev

    return stdev(values)


def budget(found: Delivered) -> object:
    from rich import box
    from rich.table import Table

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="uncertainty of the factor (GUM)", title_justify="left")
    for heading in ("from", "standard, ‰", "degrees of freedom"):
        table.add_column(heading, justify="left" if heading == "from" else "right")
    for part in found.parts:
        table.add_row(part.name, f"{1e3 * part.standard:.3f}", f"{part.freedom:g}")
    table.add_row("combined", f"{1e3 * found.uncertainty.standard:.3f}", f"{found.uncertainty.freedom:.1f}")
    return table


def calibration_table(found: Iterable[Calibrated]) -> Table:
    """What is in force: part, when, by whom, due, and the numbers that a run uses."""
    from rich import box
    from rich.table import Table

    from rigd.report.calibrations import used_words

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="calibrations", title_justify="left", title_style="bold")
    for heading in ("part", "done", "by", "due", "used"):
        table.add_column(heading, overflow="fold")
    for one in found:
        table.add_row(one.subject, one.utc[:10], one.who, one.due_utc[:10], used_words(one))
    return table
