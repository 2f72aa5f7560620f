"""The report in the terminal: outcome, points, rate constants, trips, what was used."""

from __future__ import annotations

from rich import box
from rich.console import Group, RenderableType
from rich.panel import Panel
from rich.table import Table
from rich.text import Text

from rigd.model.events import EventKind
from rigd.report.alarm_load import alarm_load
from rigd.report.data import CHAIN_HEAD, RunData
from rigd.report.figures import with_error
from rigd.report.kinetic_fit import kinetics_of
from rigd.report.words import (
    clock,
    duration,
    flow_words,
    followers_words,
    number,
    of_kind,
    outcome_words,
    percent,
    points_words,
    trip_groups,
)

_COLOURS = {"done": "green", "tripped": "red", "refused": "red", "guarded": "red", "loose": "red"}


def summary(run: RunData) -> RenderableType:
    """What a person wants to know at the end of a run, in one screen."""
    parts: list[RenderableType] = [_head(run)]
    for first, after in trip_groups(of_kind(run, EventKind.TRIP)):
        title = f"{first.subject} (first-out) at {clock(first.t_ns / 1e9)}: "
        parts.append(Text.assemble((title, "bold red"), first.text))
        if after:
            parts.append(Text(f"  {followers_words(first, after)}", style="red"))
    if run.points:
        parts.append(_points(run))
    kinetics = kinetics_of(run)
    for fit in kinetics.fits:
        k = with_error(fit.fit.k, fit.fit.k_error)
        parts.append(Text(f"k({fit.temperature_degC:g} °C) = {k} {fit.fit.unit}   {fit.fit.law.value}", style="bold"))
    parts += [Text(remark, style="dim") for remark in kinetics.remarks]
    if run.used_mL:
        used = ", ".join(f"{number(volume, 1)} mL {liquid}" for liquid, volume in run.used_mL.items())
        parts.append(Text(f"used: {used}"))
    load = alarm_load(run.events, run.duration_s)
    if load.told:
        parts.append(Text(f"alarms: {load.words}"))
    if head := run.facts.get(CHAIN_HEAD):
        parts.append(Text(f"record: chain head {head}", style="dim"))
    return Group(*parts)


def _head(run: RunData) -> Panel:
    colour = _COLOURS.get(run.outcome, "yellow")
    body = Text.assemble(
        (f"{run.recipe_title}\n" if run.recipe_title else ""),
        (outcome_words(run), f"bold {colour}"),
        f"  {points_words(run)} in {duration(run.duration_s)}",
        (f"\n{run.outcome_text}" if run.outcome_text else ""),
    )
    mark = " SIMULATED " if run.simulated else None
    return Panel(
        body,
        title=Text(run.title or run.id, style="bold"),
        title_align="left",
        subtitle=Text(mark, style="bold white on red") if mark else None,
        border_style=colour,
        box=box.ROUNDED,
    )


def _points(run: RunData) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("point")
    table.add_column("flows mL/min")
    for heading in ("bed °C", "residence", "steady after", "conversion %", "collected mL"):
        table.add_column(heading, justify="right")
    for point in run.points:
        unsteady = Text("cut short" if point.cut_short else "not steady", style="yellow")
        steady = duration(point.settle_s) if point.settled else unsteady
        table.add_row(
            point.id if point.kind == "point" else f"{point.id} ({point.kind})",
            flow_words(dict(point.flows_mL_min)),
            number(point.bed_degC, 1),
            duration(point.residence_time_s),
            steady,
            percent(point.conversion, point.conversion_sd),
            number(point.collected_mL),
        )
    return table
