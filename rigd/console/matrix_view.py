"""Cause and effect in the terminal: the matrix, its legend, and what is missing."""

from __future__ import annotations

from rich import box
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from rigd.model.rig import RigDefinition
from rigd.report.cause_effect import LEGEND, Matrix, matrix
from rigd.report.early_sight import Sight, early_sight
from rigd.report.gaps import Gap, gaps

LETTER_STYLES = {"X": "bold red", "D": "red", "F": "yellow", "H": "cyan", "N": "dim"}
GAP_HEADINGS = {
    "rated-part-without-trip": "a rated part without a trip",
    "actuator-without-rest": "an actuator without a rest state",
    "cause-unseen": "usual causes that nobody sees",
}


def cause_and_effect(rig: RigDefinition) -> RenderableType:
    """Matrix, legend and gaps of a rig."""
    found = matrix(rig)
    return Group(_table(found), _legend(found), _gaps(gaps(rig)), _sight(early_sight(rig)))


def _table(found: Matrix) -> Table:
    table = Table(
        box=box.SIMPLE_HEAD, pad_edge=False, title="cause and effect", title_justify="left", title_style="bold"
    )
    table.add_column("rule", overflow="fold", min_width=12)
    table.add_column("when", overflow="fold", min_width=16)
    table.add_column("vote")
    table.add_column("delay", justify="right")
    for column in found.columns:
        table.add_column(column, justify="center")
    for row in (row for row in found.rows if not row.only_tells):
        cells = [
            Text(row.cells.get(name, ""), style=LETTER_STYLES.get(row.cells.get(name, "")[:1], ""))
            for name in found.columns
        ]
        table.add_row(row.id, "\n".join(row.causes), row.vote, f"{row.delay_s:g} s" if row.delay_s else "", *cells)
    return table


def _legend(found: Matrix) -> Text:
    used = {cell[0] for row in found.rows for cell in row.cells.values()}
    words = "; ".join(f"{letter} {meaning}" for letter, meaning in LEGEND.items() if letter in used)
    told = ", ".join(row.id for row in found.rows if row.only_tells)
    only = f"\nOnly told to a person: {told}." if told else ""
    return Text(f"{words}. Every stop stays until a person resets it.{only}", style="dim")


def _gaps(found: tuple[Gap, ...]) -> RenderableType:
    if not found:
        return Text(
            "\nno gaps: every usual cause is seen, every rated part has a trip, every actuator a rest", style="green"
        )
    text = Text()
    for code, heading in GAP_HEADINGS.items():
        rows = [gap for gap in found if gap.code == code]
        if rows:
            text.append(f"\n{heading}\n", "bold yellow")
        for gap in rows:
            text.append(f"  {gap.what}").append(f"  (would need: {gap.remedy})\n" if gap.remedy else "\n", "dim")
    return text


def _sight(found: tuple[Sight, ...]) -> RenderableType:
    """From which flow on the early rules see a change of resistance."""
    text = Text()
    for number, one in enumerate(found):
        text.append("" if number else "\nwatched early\n", "bold")
        text.append(f"  resistance {one.stretch}: {100 * one.change:.0f} % more")
        text.append(f" is seen from about {one.from_mL_min:.2g} mL/min on")
        text.append("" if number else ", below only what is more", "dim")
        text.append("\n")
    return text
