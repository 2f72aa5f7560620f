"""``rigd calibrate``: pumps by weighing, sensors by zero and span, segments by tracer; recorded beside the rig file."""

from __future__ import annotations

import getpass
from collections.abc import Callable, Iterable, Mapping
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rigd.console.calibrating import asked_masses, budget, density_of, drawn_mL, line_through, moments, scatter
from rigd.console.output import Command, Output, json_option
from rigd.model.units import HOUSE, UnitError, parse_quantity

if TYPE_CHECKING:
    from rigd.model.calibration import Calibrated
    from rigd.model.records import RecordKind
    from rigd.model.rig import RigDefinition


class Quantity(click.ParamType):  # type: ignore[type-arg] # click 8.1 has none, 8.2 has one
    """A number with its unit, in the house unit of ``dimension``."""

    def __init__(self, dimension: str) -> None:
        self.dimension, self.name = dimension, dimension

    def convert(self, value: object, param: click.Parameter | None, ctx: click.Context | None) -> float:
        """Read it; click says where when it is wrong."""
        if isinstance(value, float):
            return value
        try:
            return parse_quantity(str(value), self.dimension)
        except UnitError as error:
            self.fail(str(error), param, ctx)


RIG = click.argument("rig", type=click.Path(path_type=Path))
WHO = click.option("--as", "who", default="", metavar="NAME", help="Who did it; default: your login.")
RAW = click.option("--raw", is_flag=True, help="Values are the device's own, not as rigd shows them "
                   "(which are corrected already when a calibration is in force).")  # fmt: skip


def valid_option(default: str) -> Callable[[Command], Command]:
    """How long the calibration holds."""
    return click.option(
        "--valid", type=Quantity("time"), default=default, show_default=True, help="Then it is overdue."
    )


@click.group()
def calibrate() -> None:
    """Find out what pumps truly deliver, sensors truly see and segments truly hold; the run uses it."""


@calibrate.command()
@RIG
@click.argument("pump")
@click.option("--ordered", type=Quantity("volume"), required=True, help="Volume ordered in each repeat: '2 mL'.")
@click.option("--mass", "masses", type=Quantity("mass"), multiple=True, help="Weighed in one repeat: "
              "'1.5723 g'. At least three times; ten are better. Without it you are asked for each.")  # fmt: skip
@click.option("--liquid", default="", help="Which liquid of the rig was weighed; default: its solvent.")
@click.option("--at", "liquid_degC", type=Quantity("temperature"), default="22 degC", show_default=True,
              help="Temperature of the liquid.")  # fmt: skip
@click.option("--density", type=Quantity("density"), help="At that temperature, instead of the liquid's properties.")
@click.option("--density-within", type=Quantity("density"), help="It is known to plus or minus this.")
@click.option("--digit", type=Quantity("mass"), default="0.1 mg", show_default=True, help="Last digit of the balance.")
@click.option("--balance", type=Quantity("mass"), default="0 g", show_default=True,
              help="Standard uncertainty of the balance, from its own calibration.")  # fmt: skip
@click.option("--evaporated", type=Quantity("mass"), default="0 g", show_default=True, help="Lost in one repeat.")
@click.option("--air", type=Quantity("pressure"), default="1013 mbar", show_default=True,
              help="Pressure of the air in the room (absolute).")  # fmt: skip
@click.option("--humidity", type=Quantity("fraction"), default="50 %", show_default=True)
@RAW
@valid_option("180 d")
@WHO
@json_option
@click.pass_obj
def pump(
    output: Output, rig: Path, pump: str, ordered: float, masses: tuple[float, ...], liquid: str, liquid_degC: float,
    density: float | None, density_within: float | None, digit: float, balance: float, evaporated: float, air: float,
    humidity: float, raw: bool, valid: float, who: str,
) -> int:  # fmt: skip
    """Weigh what PUMP delivers into a tared, covered vessel, the same volume each time.

    Flush it with the liquid first; weigh against the pressure it works at. The factor is what comes out over what was
    ordered; a run tells the pump so much less or more.
    """
    from rigd.analysis.gravimetric import Room, Weighing, delivered
    from rigd.model.records import RecordKind

    definition, before = _rig(rig, RecordKind.PUMP, pump, [one.id for one in _load(rig).pumps])
    masses = masses or asked_masses(output, pump, ordered)
    density_g_mL, standard, per_K, source = density_of(definition, liquid, liquid_degC, density, density_within)
    weighing = Weighing(ordered, masses, density_g_mL, standard, per_K, 0.5, digit, balance, evaporated)
    try:
        found = delivered(weighing, Room(liquid_degC, air * 1e3, humidity))
    except ValueError as error:
        raise click.UsageError(str(error)) from None
    used = 1.0 if raw or before is None else before.values["factor"]
    factor = found.factor * used
    values = {
        "factor": factor, "factor_expanded": found.uncertainty.expanded * used, "coverage": found.uncertainty.coverage,
        "freedom": min(found.uncertainty.freedom, 1e9), "repeats": float(len(masses)), "ordered_mL": ordered,
        "density_g_mL": density_g_mL, "temperature_degC": liquid_degC,
        "repeatability": scatter(found.volumes_mL) / ordered,
    }  # fmt: skip
    one = _calibrated(RecordKind.PUMP, pump, values, valid, who)
    path = _write(rig, one, f"factor {used:.5g}", f"factor {factor:.5g}; density: {source}")
    output.document({"recorded": _entry(one), "file": str(path), "budget": {p.name: p.standard for p in found.parts}})
    output.say(budget(found))
    output.say(f"{pump} delivers {factor:.5f} of what it is told, ± {values['factor_expanded']:.5f} "
               f"(k = {found.uncertainty.coverage:.2f}, 95 %); density {density_g_mL:.5g} g/mL: {source}")  # fmt: skip
    output.say(f"recorded in {path}; in force from the next run, due {one.due_utc[:10]}")
    return 0


@calibrate.command()
@RIG
@click.argument("tag")
@click.option("--zero", type=(str, str), required=True, metavar="TRUE SHOWN", help="What was applied, what it showed: "
              "'0 bar' '0.03 bar'.")  # fmt: skip
@click.option("--span", type=(str, str), metavar="TRUE SHOWN", help="The same near the top; without it the gain stays.")
@RAW
@valid_option("365 d")
@WHO
@json_option
@click.pass_obj
def sensor(
    output: Output, rig: Path, tag: str, zero: tuple[str, str], span: tuple[str, str] | None, raw: bool, valid: float,
    who: str,
) -> int:  # fmt: skip
    """Compare TAG with something true at one point, or at two; a run shows (reading - zero) * gain."""
    from rigd.model.records import RecordKind
    from rigd.model.rig import TagKind

    measured = {one.id: one for one in _load(rig).tags if one.kind is TagKind.MEASURED}
    _, before = _rig(rig, RecordKind.SENSOR, tag, list(measured))
    dimension = next((name for name, unit in HOUSE.items() if unit == measured[tag].unit), "fraction")
    old_zero, old_gain = (before.values["zero"], before.values["gain"]) if before is not None else (0.0, 1.0)
    pairs = []
    for given in (zero, span) if span else (zero,):
        try:
            true, shown = (parse_quantity(text, dimension) for text in given)
        except UnitError as error:
            raise click.UsageError(str(error)) from None
        pairs.append((true, shown if raw else shown / old_gain + old_zero))
    gain, offset = line_through(pairs, old_gain, measured[tag].high - measured[tag].low)
    one = _calibrated(RecordKind.SENSOR, tag, {"zero": offset, "gain": gain, "points": float(len(pairs))}, valid, who)
    path = _write(rig, one, f"zero {old_zero:.5g}, gain {old_gain:.5g}", f"zero {offset:.5g}, gain {gain:.5g}")
    output.document({"recorded": _entry(one), "file": str(path)})
    output.say(f"{tag}: zero {offset:.5g} {measured[tag].unit}, gain {gain:.5f}; in force from the next run, due "
               f"{one.due_utc[:10]}; recorded in {path}")  # fmt: skip
    return 0


@calibrate.command()
@RIG
@click.argument("segment")
@click.argument("curve", type=click.Path(path_type=Path))
@click.option("--flow", type=Quantity("flow"), required=True, help="Total flow through it while it was recorded.")
@click.option("--step", "is_step", is_flag=True, help="The tracer was switched on and stayed on; else it was a pulse.")
@click.option("--inlet", type=click.Path(path_type=Path), help="The same curve at the inlet, to be taken off.")
@valid_option("365 d")
@WHO
@json_option
@click.pass_obj
def tracer(
    output: Output, rig: Path, segment: str, curve: Path, flow: float, is_step: bool, inlet: Path | None, valid: float,
    who: str,
) -> int:  # fmt: skip
    """Hold-up and dispersion of SEGMENT (parts joined by +: L-1+COL+L-2) from the tracer CURVE (CSV: seconds, signal).

    Time 0 is when the tracer went in.
    """
    from rigd.analysis.tracer import peclet_of, without
    from rigd.model.records import RecordKind

    definition = _load(rig)
    in_file_mL = drawn_mL(definition, segment)
    try:
        found = moments(curve, is_step)
        found = found if inlet is None else without(found, moments(inlet, is_step))
        peclet = peclet_of(found)
    except ValueError as error:
        raise click.UsageError(str(error)) from None
    volume_mL = flow * found.mean_s / 60.0
    values = {"volume_mL": volume_mL, "drawn_mL": in_file_mL, "mean_s": found.mean_s, "flow_mL_min": flow,
              "tanks": min(found.tanks, 1e9), "peclet": min(peclet, 1e9)}  # fmt: skip
    one = _calibrated(RecordKind.SEGMENT, segment, values, valid, who)
    path = _write(rig, one, f"{in_file_mL:.4g} mL by the rig file", f"{volume_mL:.4g} mL by tracer")
    output.document({"recorded": _entry(one), "file": str(path)})
    output.say(f"{segment}: {volume_mL:.4g} mL by tracer, {in_file_mL:.4g} mL by the rig file ("
               f"{volume_mL / in_file_mL - 1:+.1%}); spread of {found.tanks:.3g} tanks, "
               f"Peclet {peclet:.3g}")  # fmt: skip
    output.say(f"recorded in {path}. The run counts volumes by the rig file: where they differ, correct bores, lengths "
               "or voidage there")  # fmt: skip
    return 0


@calibrate.command("list")
@RIG
@json_option
@click.pass_obj
def list_calibrations(output: Output, rig: Path) -> int:
    """Show the calibrations of RIG that are in force. Exit 0: all in date. 1: one is overdue."""
    from rigd.adapters.rig_records import read_records
    from rigd.config.calibrating import facts, in_force, overdue

    found, now = in_force(_load(rig), read_records(rig)), datetime.now(UTC)
    late = overdue(found, now)
    output.document({"calibrations": facts(found, now)})
    for one in found:
        mark = "[bold red]overdue[/]" if one in late else "[green]in date[/]"
        told = ", ".join(f"{name} {value:.5g}" for name, value in one.values.items())
        output.say(
            f"{mark}  {one.subject} ({one.kind.value}) {one.utc[:10]} by {one.who}, due {one.due_utc[:10]}: {told}"
        )
    if not found:
        output.say("none; see rigd calibrate --help")
    return 1 if late else 0


def _load(rig: Path) -> RigDefinition:
    from rigd.config.load import load_rig

    return load_rig(rig)


def _rig(rig: Path, kind: RecordKind, subject: str, known: Iterable[str]) -> tuple[RigDefinition, Calibrated | None]:
    """The rig and what is in force for this part; click's error for one that it does not have."""
    from rigd.adapters.rig_records import read_records
    from rigd.config.calibrating import in_force

    names = sorted(known)
    if subject not in names:
        raise click.UsageError(f"{rig} has no {subject!r} to be calibrated so; it has {', '.join(names) or 'none'}")
    definition = _load(rig)
    found = in_force(definition, read_records(rig))
    return definition, next((one for one in found if (one.kind, one.subject) == (kind, subject)), None)


def _calibrated(kind: RecordKind, subject: str, values: Mapping[str, float], valid_s: float, who: str) -> Calibrated:
    from rigd.model.calibration import Calibrated

    now = datetime.now(UTC)
    due = now + timedelta(seconds=valid_s)
    stamps = [one.isoformat(timespec="seconds") for one in (now, due)]
    return Calibrated(kind, subject, stamps[0], stamps[1], who.strip() or getpass.getuser(), values)


def _write(rig: Path, one: Calibrated, as_found: str, as_left: str) -> Path:
    from rigd.adapters.rig_records import append_record
    from rigd.config.calibrating import record_of

    return append_record(rig, record_of(one, as_found, as_left))


def _entry(one: Calibrated) -> dict[str, object]:
    from dataclasses import asdict

    return {**asdict(one), "kind": one.kind.value}
