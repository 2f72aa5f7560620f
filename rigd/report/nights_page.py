"""The page of a campaign of nights: one HTML file that needs nothing else."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from rigd import __version__
from rigd.report.figures import COLOURS, INK, new_figure, styled, svg_text
from rigd.report.words import CAUTIONS

Rows = Sequence[Mapping[str, Any]]
MOST_PANELS = 12


def write_nights_page(path: Path, told: Mapping[str, Any], rows: Rows) -> Path:
    """Write the page from what the summary tells (texts and tables) and the rows (figures)."""
    environment = Environment(
        loader=PackageLoader("rigd.report"), autoescape=True, undefined=StrictUndefined, trim_blocks=True
    )
    text = environment.get_template("nights.html.j2").render(
        told=told,
        spread_svg=Markup(spread_figure([result["column"] for result in told["results"]], told, rows)),
        influence_svg=Markup(influence_figure(told)) if told["strongest"] else "",
        cautions=CAUTIONS,
        version=__version__,
    )
    path.write_text(text, encoding="utf-8")
    return path


@styled
def spread_figure(columns: Sequence[str], told: Mapping[str, Any], rows: Rows) -> str:
    """A histogram of each result."""
    words = {result["column"]: f"{result['words']} / {result['unit']}" for result in told["results"]}
    shown = [c for c in columns if not c.startswith("settle_s.")][:MOST_PANELS]
    across = min(3, max(len(shown), 1))
    down = math.ceil(max(len(shown), 1) / across)
    figure, grid = new_figure(down, across, (10.2, 2.1 * down), squeeze=False)
    for place, axes in enumerate(grid.flat):
        if place >= len(shown):
            axes.set_visible(False)
            continue
        column = shown[place]
        scale = 100.0 if column.startswith("conversion.") else 1.0
        values = [scale * row[column] for row in rows if isinstance(row.get(column), (int, float))]
        values = [value for value in values if math.isfinite(value)]
        axes.hist(values, bins=min(20, max(5, int(math.sqrt(len(values))))), color=COLOURS[0], alpha=0.85)
        axes.set_xlabel(words[column], fontsize=8.5)
        axes.grid(visible=False, axis="x")
    grid[0][0].set_ylabel("nights")
    return svg_text(figure)


@styled
def influence_figure(told: Mapping[str, Any]) -> str:
    """How strongly each varied number goes with each result: a matrix of rank correlations, or of variance shares."""
    names, results = told["varied"], [r for r in told["results"] if r["influences"]][: 2 * MOST_PANELS]
    table = np.full((len(results), len(names)), np.nan)
    for i, result in enumerate(results):
        for one in result["influences"]:
            table[i, names.index(one["what"])] = one["share"]
    figure, axes = new_figure(1, 1, (10.2, 1.2 + 0.3 * len(results)))
    image = axes.imshow(table, cmap="PuOr", vmin=-1, vmax=1, aspect="auto")
    axes.set_xticks(range(len(names)), [name.split(".", 1)[1][-34:] for name in names], fontsize=8)
    axes.set_yticks(range(len(results)), [result["words"] for result in results], fontsize=8)
    axes.grid(visible=False)
    for (i, j), value in np.ndenumerate(table):
        if math.isfinite(value):
            colour = "white" if abs(value) > 0.6 else INK
            axes.text(j, i, f"{value:+.2f}", ha="center", va="center", fontsize=7.5, color=colour)
    figure.colorbar(image, ax=axes, shrink=0.8, label=told["share_words"])
    return svg_text(figure)
