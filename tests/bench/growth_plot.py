"""The plot of cost against size: one panel per quantity, both axes in decades, the fitted power law as a line."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

PREFIX = "growth."
COLUMNS = 2


def write_growth_plot(figures: Sequence[Mapping[str, Any]], path: Path) -> bool:
    """Draw the growth figures of a bench document; False when it holds none."""
    drawn = [one for one in figures if str(one["id"]).startswith(PREFIX) and one.get("detail")]
    if not drawn:
        return False
    import matplotlib as mpl

    mpl.use("Agg")
    from matplotlib import pyplot

    rows = math.ceil(len(drawn) / COLUMNS)
    with mpl.rc_context({"svg.hashsalt": "rigd", "svg.fonttype": "none", "font.size": 9}):
        figure, axes = pyplot.subplots(rows, COLUMNS, figsize=(7.2, 2.6 * rows), squeeze=False, layout="constrained")
        for axis, one in zip(axes.flat, drawn, strict=False):
            _panel(axis, one)
        for axis in axes.flat[len(drawn) :]:
            axis.set_axis_off()
        figure.savefig(path, metadata={"Date": None})
        pyplot.close(figure)
    return True


def _panel(axis: Any, one: Mapping[str, Any]) -> None:
    costs = one["detail"]["costs"]
    sizes, values = [float(size) for size in costs], [float(cost) for cost in costs.values()]
    slope = float(one["value"])
    middle = [math.exp(sum(map(math.log, column)) / len(column)) for column in (sizes, values)]
    line = [middle[1] * (size / middle[0]) ** slope for size in sizes]
    axis.loglog(sizes, values, "o", color="#1b5e8c")
    axis.loglog(sizes, line, color="#b0413e", linewidth=1, label=f"exponent {slope:.2f}")
    axis.set(title=one["what"], xlabel=str(one["id"]).removeprefix(PREFIX), ylabel=one["detail"]["unit"])
    axis.legend(frameon=False)
