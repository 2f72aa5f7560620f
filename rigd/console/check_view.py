"""The findings of ``rigd check`` for people: problems, the plan, response times, cause and effect."""

from __future__ import annotations

from rich import box
from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from rigd.console.calibrating import calibration_table
from rigd.console.checking import Checked, supplies_mL
from rigd.console.matrix_view import cause_and_effect
from rigd.console.output import Output
from rigd.console.trouble import print_problems
from rigd.logic.plan_problems import KEPT_BACK
from rigd.logic.planning import Plan
from rigd.logic.response import Response
from rigd.model.protection import Interlock
from rigd.model.rig import PropertySet, RigDefinition
from rigd.report.cause_words import condition_words
from rigd.report.words import clock, duration

BAR = 16
STOP_STYLES = {"CUT": "red", "QUENCH": "yellow", "HOLD": "cyan"}


def show_check(output: Output, found: Checked) -> None:
    """Print all of it, the verdict last."""
    output.say(Text.assemble((found.rig.title, "bold"), f"  ({found.rig.name})"))
    if found.recipe is not None:
        output.say(Text.assemble((found.recipe.title, "bold"), f"  ({found.recipe.name})"))
    output.say("")
    if found.plan is not None:
        output.say(timeline(found.plan))
        output.say(_volumes(found.plan))
        output.say("")
        output.say(bottles(found.rig, found.plan))
        output.say("")
    output.say(response_times(found.rig, found.responses))
    output.say(_footnote(found))
    output.say("")
    output.say(cause_and_effect(found.rig))
    if found.liquids:
        output.say("")
        output.say(properties(found.liquids))
    if found.calibrations:
        output.say("")
        output.say(calibration_table(found.calibrations))
    if found.problems:
        output.say("")
        print_problems(output.people, found.problems)
    verdict = ("fit to run", "bold green") if found.fit else ("NOT fit to run", "bold red")
    output.say(Text.assemble("\n", verdict))


def properties(sets: tuple[PropertySet, ...]) -> RenderableType:
    """What the simulator takes each liquid for, with the source of the numbers."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="liquids of the simulator", title_justify="left")
    table.add_column("solvent")
    for heading in ("g/mL 25 °C", "mPa s 0, 25, 60 °C", "J/(g K)", "boils °C"):
        table.add_column(heading, justify="right")
    table.add_column("source", overflow="fold", style="dim")
    for one in sets:
        viscosity = ", ".join(f"{value:.3g}" for value in one.viscosity_mPa_s)
        numbers = (f"{one.density_g_mL[1]:.4g}", viscosity, f"{one.heat_capacity_J_g_K:.3g}", f"{one.boiling_degC:g}")
        table.add_row(one.id, *numbers, one.source)
    return table


def timeline(planned: Plan) -> RenderableType:
    """The phases with their times, flows, liquid drawn and a bar each."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="plan", title_justify="left", title_style="bold")
    table.add_column("phase", overflow="fold")
    for heading in ("begins", "takes", "mL/min", "draws mL", "refills"):
        table.add_column(heading, justify="right")
    table.add_column("", no_wrap=True)
    for phase in planned.phases:
        start, end = (
            round(BAR * t / max(planned.duration_s, 1.0)) for t in (phase.start_s, phase.start_s + phase.duration_s)
        )
        mark = Text().append(" " * start).append("█" * max(1, end - start), "cyan" if phase.point else "dim")
        flow, drawn_mL = sum(phase.flows_mL_min.values()), sum(phase.drawn_mL.values())
        cells = [clock(phase.start_s), duration(phase.duration_s), f"{flow:.3g}" if flow else "–"]
        cells += [f"{drawn_mL:.1f}" if drawn_mL >= 0.05 else "", str(phase.refills or "")]
        table.add_row(phase.label, *cells, mark)
    return table


def _volumes(planned: Plan) -> Text:
    """In all: time, fractions, waste."""
    text = Text().append(f"{duration(planned.duration_s)} in all", "bold")
    return text.append(f"; {planned.collected_mL:.1f} mL collected, {planned.waste_mL:.0f} mL to waste. Estimates.")


def bottles(rig: RigDefinition, planned: Plan) -> RenderableType:
    """Each liquid: what there is, what is drawn, what is left, and whether it lasts."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="bottles", title_justify="left", title_style="bold")
    table.add_column("liquid")
    for heading in ("there is mL", "drawn mL", "left mL", "lasts"):
        table.add_column(heading, justify="right")
    for name, here_mL in supplies_mL(rig).items():
        drawn_mL = planned.used_mL.get(name, 0.0)
        lasts = drawn_mL <= here_mL * (1.0 - KEPT_BACK)
        verdict = Text("yes" if lasts else "no", style="green" if lasts else "bold red")
        table.add_row(name, f"{here_mL:.0f}", f"{drawn_mL:.1f}", f"{here_mL - drawn_mL:.0f}", verdict)
    return table


def response_times(rig: RigDefinition, times: tuple[Response, ...]) -> RenderableType:
    """Every interlock of the rig file: what trips it, what it does, how fast, against how much time there is."""
    known = {response.interlock: response for response in times}
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, title="response times", title_justify="left", title_style="bold")
    table.add_column("interlock", overflow="fold")
    table.add_column("trips when", overflow="fold")
    table.add_column("vote")
    table.add_column("does")
    table.add_column("answers in", justify="right")
    table.add_column("time there is", justify="right")
    table.add_column("margin", justify="right")
    table.add_column("up to mL/min", justify="right")
    for lock in rig.interlocks:
        if not lock.built_in:
            table.add_row(*_row(rig, lock, known.get(lock.id)))
    return table


def _row(rig: RigDefinition, lock: Interlock, response: Response | None) -> list[RenderableType]:
    stop = lock.stop.name
    cells: list[RenderableType] = [lock.id, "\n".join(condition_words(rig, cause) for cause in lock.causes)]
    cells += [lock.architecture, Text(stop.lower(), style=STOP_STYLES.get(stop, ""))]
    if response is None:
        return [*cells, "–", "–", "–", "–"]
    cells.append(f"{response.budget.total_s:.2f} s")
    if response.margin is None:
        return [*cells, "not known", "–", "–"]
    style = "green" if response.fit else "bold red"
    cells += [f"{response.safety_s:.2f} s", Text(f"{response.margin:.2f}", style=style)]
    return [*cells, f"{response.flow_max_mL_min:.3g}"]


def _footnote(found: Checked) -> Text:
    built_in = sum(lock.built_in for lock in found.rig.interlocks)
    compliance = sum(pump.compliance_mL_bar for pump in found.rig.pumps)
    words = (
        f"{built_in} built-in interlocks besides (links, stalls, valves, restarts, faults of the daemon).",
        "Time there is: from the limit to the weakest rating with everything blocked, at",
        f"{found.flow_max_mL_min:g} mL/min and {compliance:g} mL/bar as declared; at most half may be used, so the",
        "margin must be at least 1. Up to: the largest total flow at which it still is. This bounds the design",
        "and promises nothing: the relief device comes first.",
    )
    return Text(" ".join(words), style="dim")
