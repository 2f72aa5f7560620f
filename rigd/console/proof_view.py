"""A proof as the page's facts, as JSON and as a terminal table."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from rigd.prove.judge import HELD, MISSED, UNSEEN, Night
from rigd.prove.proof import Healthy, bound, counted

if TYPE_CHECKING:
    from rich.table import Table

STYLES = {HELD: "held", UNSEEN: "unseen", MISSED: "missed"}


def told(rig: str, recipe: str, phases: Sequence[str], nights: Sequence[Night], healthy: Healthy) -> dict[str, Any]:
    """What the page and ``--json`` say."""
    counts = counted(nights)
    missed = [night for night in nights if night.verdict == MISSED]
    return {
        "rig": rig,
        "recipe": recipe,
        "lead": f"{len(nights)} faulted nights, {healthy.hours:.1f} h without a fault",
        "words": _words(counts, len(nights)),
        "bound_words": _bound_words(len(missed), len(nights)),
        "healthy_words": _healthy_words(healthy),
        "counts": counts,
        "bound": bound(len(missed), len(nights)),
        "spurious": list(healthy.spurious),
        "healthy_h": healthy.hours,
        "phases": list(phases),
        "missed": [asdict(night) for night in missed],
        "unseen": _unseen(nights),
        "matrix": _matrix(phases, nights),
        "largest_peak": max(
            (night.peak_share for night in nights if night.peak_share == night.peak_share), default=0.0
        ),
    }


def _words(counts: Mapping[str, int], total: int) -> str:
    if counts[MISSED]:
        return f"{counts[MISSED]} of {total} nights missed; {counts[HELD]} held, {counts[UNSEEN]} not seen"
    unseen = f"{counts[UNSEEN]} not seen by anything fitted (no rating passed)"
    return f"None of {total} nights missed: {counts[HELD]} answered or harmless, {unseen}"


def _bound_words(missed: int, total: int) -> str:
    limit = bound(missed, total)
    return f"{missed} missed of {total}: at most {100 * limit:.2g} % of such nights are missed (95 %; simulator only)."


def _healthy_words(healthy: Healthy) -> str:
    if healthy.spurious:
        return f"Without a fault it tripped all the same: {', '.join(healthy.spurious)}."
    return (
        f"No trip in {healthy.hours:.1f} h without a fault: at most {3 / max(healthy.hours, 1e-9):.2g} an hour (95 %)."
    )


def _unseen(nights: Sequence[Night]) -> list[dict[str, Any]]:
    rows: dict[tuple[str, str], dict[str, Any]] = {}
    for night in nights:
        if night.verdict == UNSEEN:
            row = rows.setdefault(
                (night.kind, night.target), {"kind": night.kind, "target": night.target, "nights": 0, "add": night.add}
            )
            row["nights"] += 1
    return list(rows.values())


def _matrix(phases: Sequence[str], nights: Sequence[Night]) -> list[dict[str, Any]]:
    rows: dict[tuple[str, str, float], dict[str, Night]] = {}
    for night in nights:
        cells = rows.setdefault((night.kind, night.target, night.magnitude), {})
        worst = cells.get(night.phase)
        order = (HELD, UNSEEN, MISSED)
        if worst is None or order.index(night.verdict) > order.index(worst.verdict):
            cells[night.phase] = night
    return [
        {"kind": kind, "target": target, "magnitude": size, "cells": [_cell(cells.get(phase)) for phase in phases]}
        for (kind, target, size), cells in sorted(rows.items())
    ]


def _cell(night: Night | None) -> dict[str, str]:
    if night is None:
        return {"style": "", "text": ""}
    text = "~" if night.stop == "none" else night.stop
    if not math.isnan(night.first_s):
        text += f" {night.first_s:.3g}"
    return {"style": STYLES[night.verdict], "text": text}


def table(facts: Mapping[str, Any]) -> Table:
    """What was missed and what was not seen."""
    from rich import box
    from rich.markup import escape
    from rich.table import Table

    made = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for heading in ("", "fault", "on", "phase", "what"):
        made.add_column(heading, overflow="fold")
    for night in facts["missed"]:
        size = f"{night['kind']} {night['magnitude']:g}"
        made.add_row("[bold red]missed[/]", size, night["target"], night["phase"], escape(night["why"]))
    for row in facts["unseen"]:
        made.add_row("[yellow]not seen[/]", row["kind"], row["target"], f"{row['nights']} nights", f"add {row['add']}")
    return made
