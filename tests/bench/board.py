"""Runs the groups of figures, prints the table and writes the JSON."""

from __future__ import annotations

import argparse
import gc
import importlib
import json
import os
import platform
import sys
import time
from collections.abc import Iterator, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from bench.figures import Figure, Group, Scale
from bench.growth_plot import write_growth_plot
from rich.console import Console
from rich.table import Table

GROUPS: dict[str, str] = {
    "start": "start_time",
    "scan": "cost_of_scan",
    "journal": "cost_of_journal",
    "plant": "plant_cost",
    "dry": "dry_cost",
    "nights": "nights_cost",
    "replay": "cost_of_replay",
    "trip": "trip_time",
    "live": "live_cost",
    "cards": "cards_cost",
    "growth": "growth",
}
"""Group -> module that has ``<group>_figures``; loaded when its turn comes, so that one that is broken is one row."""
WIDTH = 170
SCHEMA = "rigd-bench-1"


def main(arguments: Sequence[str] | None = None) -> int:
    """Measure what was asked for; the exit code is 1 when a figure could not be measured, whatever was held."""
    asked = _parser().parse_args(arguments)
    scale = Scale.QUICK if asked.quick else Scale.FULL if asked.full else Scale.NORMAL
    names = asked.only or list(GROUPS)
    began = datetime.now(UTC)
    figures: list[Figure] = []
    for name in names:
        sys.stderr.write(f"measuring: {name}\n")
        gc.collect()
        gc.freeze()  # what earlier groups left behind does not slow the collector down
        figures += list(_measured(name, scale))
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "began_utc": began.isoformat(timespec="seconds"),
        "took_s": round((datetime.now(UTC) - began).total_seconds(), 1),
        "scale": scale.name.lower(),
        "machine": machine(),
        "figures": [figure.facts() for figure in figures],
    }
    Path(asked.json).write_text(json.dumps(document, indent=1) + "\n", encoding="utf-8")
    plot = Path(asked.json).with_name(f"{Path(asked.json).stem}-growth.svg")
    if write_growth_plot(document["figures"], plot):
        sys.stderr.write(f"cost against size: {plot}\n")
    print_table(figures)
    return 1 if any(figure.failed for figure in figures) else 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="run.py", description="Measure the figures to hold, each beside its floor.")
    parser.add_argument(
        "--json", default="bench.json", metavar="PATH", help="where the JSON goes (default: %(default)s)"
    )
    parser.add_argument("--only", action="append", choices=list(GROUPS), metavar="GROUP", help=", ".join(GROUPS))
    size = parser.add_mutually_exclusive_group()
    size.add_argument("--quick", action="store_true", help="tiny sizes: tells that it works, not how fast it is")
    size.add_argument("--full", action="store_true", help="10 000 trips, the whole night, two decades of everything")
    return parser


def _measured(name: str, scale: Scale) -> Iterator[Figure]:
    """The figures of a group; a group that breaks is a row of its own and does not stop the others."""
    started_s = time.monotonic()
    try:
        group: Group = getattr(importlib.import_module(f"bench.{GROUPS[name]}"), f"{name}_figures")
        yield from group(scale)
    except Exception as error:  # noqa: BLE001 - whatever broke is told in the table
        yield Figure(name, f"group {name!r}", note=f"failed: {type(error).__name__}: {error}", failed=True)
    sys.stderr.write(f"  {time.monotonic() - started_s:.1f} s\n")


def machine() -> dict[str, object]:
    """What was measured on; one number of load, because a busy machine explains much."""
    return {
        "processor": _processor(),
        "cores": os.cpu_count(),
        "system": platform.platform(),
        "python": platform.python_version(),
        "load_1min": round(os.getloadavg()[0], 2),
    }


def _processor() -> str:
    try:
        lines = Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines()
    except OSError:
        return platform.processor()
    return next(
        (line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")), platform.processor()
    )


def print_table(figures: Sequence[Figure]) -> None:
    """The table on stdout; as wide as it needs when that is no terminal."""
    console = Console() if sys.stdout.isatty() else Console(width=WIDTH)
    table = Table(title=_title(), title_justify="left")
    for heading in ("what", "value", "floor", "ratio", "target", "", "note"):
        table.add_column(heading, justify="right" if heading in ("value", "floor", "ratio") else "left")
    for figure in figures:
        table.add_row(*_cells(figure))
    console.print(table)


def _title() -> str:
    facts = machine()
    return f"{facts['processor']}, {facts['cores']} cores, Python {facts['python']}, load {facts['load_1min']}"


def _cells(figure: Figure) -> tuple[str, ...]:
    words = {True: "[green]held[/]", False: "[red]missed[/]", None: ""}[figure.held]
    if figure.value is None:
        words = "[red]failed[/]" if figure.failed else "[yellow]no number[/]"
    floor = f"{shown(figure.floor)} ({figure.floor_what})" if figure.floor is not None else "-"
    ratio = f"{shown(figure.ratio)} x" if figure.ratio is not None else "-"
    value = f"{shown(figure.value)} {figure.unit}".strip()
    return figure.what, value, floor, ratio, figure.target.words(figure.unit), words, figure.note


def shown(value: float | None) -> str:
    """Three digits, thousands apart."""
    if value is None:
        return "-"
    return f"{value:,.0f}".replace(",", " ") if abs(value) >= 1000 else f"{value:.3g}"
