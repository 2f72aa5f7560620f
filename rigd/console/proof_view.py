"""A proof as the page's facts, as JSON and as a terminal table."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from rigd.prove.judge import HELD, MISSED, TOLD, UNSEEN, VERDICTS, Night
from rigd.prove.proof import Healthy, bound, counted
from rigd.prove.witness import DANGEROUS, SEVERITIES

if TYPE_CHECKING:
    from rich.table import Table

STYLES = {HELD: "held", TOLD: "told", UNSEEN: "unseen", MISSED: "missed"}


def told(rig: str, recipe: str, phases: Sequence[str], nights: Sequence[Night], healthy: Healthy) -> dict[str, Any]:
    """What the page and ``--json`` say.

    ``all_held``: nothing was missed (no part over its rating, no liquid moved after a cut, each stop of the right class
    with the right first-out, no start before a reset), and nothing tripped without a fault. Nights in which no stop
    came though the fault asks for one are listed under ``told`` (an alarm came) and ``unseen``, with what they did.
    """
    counts = counted(nights)
    missed = [night for night in nights if night.verdict == MISSED]
    return {
        "rig": rig,
        "recipe": recipe,
        "lead": f"{len(nights)} faulted nights, {healthy.hours:.1f} h without a fault",
        "words": _words(counts, len(nights)),
        "danger_words": _danger_words(nights),
        "bound_words": _bound_words(len(missed), len(nights)),
        "healthy_words": _healthy_words(healthy),
        "all_held": not missed and not healthy.spurious,
        "dangerous": sum(night.severity == DANGEROUS for night in nights),
        "counts": counts,
        "bound": bound(len(missed), len(nights)),
        "spurious": list(healthy.spurious),
        "healthy_h": healthy.hours,
        "healthy_alarms": dict(Counter(healthy.alarms)),
        "phases": list(phases),
        "missed": [asdict(night) for night in missed],
        "told": _unanswered(nights, TOLD),
        "unseen": _unanswered(nights, UNSEEN),
        "matrix": _matrix(phases, nights),
        "largest_peak": max(
            (night.peak_share for night in nights if night.peak_share == night.peak_share), default=0.0
        ),
    }


def _words(counts: Mapping[str, int], total: int) -> str:
    rest = f"{counts[HELD]} answered or harmless, {counts[TOLD]} told by an alarm only, {counts[UNSEEN]} not seen"
    return f"{counts[MISSED] or 'None'} of {total} nights missed: {rest}"


def _danger_words(nights: Sequence[Night]) -> str:
    """The faults that hurt somebody or something while nothing stopped."""
    kinds = dict.fromkeys(night.kind for night in nights if night.severity == DANGEROUS)
    if not kinds:
        return "No fault that nothing stopped was dangerous in the true plant."
    return f"Dangerous in the true plant, and nothing stopped: {', '.join(kinds)}."


def _bound_words(missed: int, total: int) -> str:
    if not total:
        return "No night with a fault was rehearsed."
    limit = bound(missed, total)
    return f"{missed} missed of {total}: at most {100 * limit:.2g} % of such nights are missed (95 %; simulator only)."


def _healthy_words(healthy: Healthy) -> str:
    if healthy.spurious:
        return f"Without a fault it tripped all the same: {', '.join(healthy.spurious)}."
    limit = 3 / max(healthy.hours, 1e-9)
    alarms = ", ".join(f"{name} {count} times" for name, count in Counter(healthy.alarms).items())
    return (
        f"No trip in {healthy.hours:.1f} h ({healthy.nights} rehearsed) without a fault: "
        f"at most {limit:.2g} an hour (95 %). "
        f"Alarms in them: {alarms or 'none'}."
    )


def _unanswered(nights: Sequence[Night], verdict: str) -> list[dict[str, Any]]:
    """By fault and part, the worst first: how many nights of each severity, the worst in words, alarms, what to add."""
    rows: dict[tuple[str, str], list[Night]] = {}
    for night in nights:
        if night.verdict == verdict:
            rows.setdefault((night.kind, night.target), []).append(night)
    found = [_row(together) for together in rows.values()]
    return sorted(found, key=lambda row: -SEVERITIES.index(row["severity"]))


def _row(nights: Sequence[Night]) -> dict[str, Any]:
    worst = max(nights, key=lambda night: SEVERITIES.index(night.severity))
    return {
        "kind": worst.kind,
        "target": worst.target,
        "nights": len(nights),
        "severity": worst.severity,
        "by_severity": {name: n for name in SEVERITIES if (n := sum(night.severity == name for night in nights))},
        "harm": worst.harm,
        "worst": {"phase": worst.phase, "magnitude": worst.magnitude, "seed": worst.seed},
        "alarms": list(dict.fromkeys(alarm for night in nights for alarm in night.alarms)),
        "add": worst.add,
    }


def _matrix(phases: Sequence[str], nights: Sequence[Night]) -> list[dict[str, Any]]:
    rows: dict[tuple[str, str, float], dict[str, Night]] = {}
    for night in nights:
        cells = rows.setdefault((night.kind, night.target, night.magnitude), {})
        worst = cells.get(night.phase)
        if worst is None or VERDICTS.index(night.verdict) > VERDICTS.index(worst.verdict):
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
        text += f" {night.first_s:.0f}" if night.first_s >= 100.0 else f" {night.first_s:.3g}"
    return {"style": STYLES[night.verdict], "text": text}


def table(facts: Mapping[str, Any]) -> Table:
    """What was missed, what was not seen, what was only told."""
    from rich import box
    from rich.markup import escape
    from rich.table import Table

    made = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for heading in ("", "fault", "on", "phase", "what"):
        made.add_column(heading, overflow="fold")
    for night in facts["missed"]:
        size = f"{night['kind']} {night['magnitude']:g}"
        made.add_row("[bold red]missed[/]", size, night["target"], night["phase"], escape(night["why"]))
    for heading, rows in (("[yellow]not seen[/]", facts["unseen"]), ("told only", facts["told"])):
        for row in rows:
            what = row["severity"] + (f": {row['harm']}" if row["harm"] else "")
            what += f" (add {row['add']})" if row["add"] else f" ({', '.join(row['alarms'])})"
            made.add_row(heading, row["kind"], row["target"], f"{row['nights']} nights", escape(what))
    return made
