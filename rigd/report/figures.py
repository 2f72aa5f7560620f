"""Figures as SVG text for the page: readable in print, honest about what is simulated, small for long runs."""

from __future__ import annotations

import io
import math
import re
from collections.abc import Callable, Sequence
from functools import wraps
from itertools import pairwise
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from rigd.model.events import EventKind
from rigd.report.data import PhaseSpan, PointRow, RunData, Trace
from rigd.report.kinetic_fit import KineticsResult

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Draw = TypeVar("Draw", bound=Callable[..., str])

COLOURS = ("#1b5e8c", "#b8560f", "#3a7d44", "#7b4b94", "#8a6d1f", "#a33b52")
INK, PALE = "#22303a", "#d9dee2"
PIXELS = 1200
"""Most bins that a trace is drawn in; each keeps its smallest and largest value, so no peak is lost."""

_STYLE: Any = {
    "svg.fonttype": "path",
    "svg.hashsalt": "rigd",
    "font.family": "DejaVu Sans",
    "font.size": 9.5,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "grid.color": PALE,
    "grid.linewidth": 0.6,
    "legend.frameon": False,
    "axes.axisbelow": True,
}


def styled(draw: Draw) -> Draw:
    """Draw with the page's style, whatever the user's own settings are."""

    @wraps(draw)
    def in_style(*arguments: Any) -> str:
        import matplotlib

        with matplotlib.rc_context(_STYLE):
            return draw(*arguments)

    return in_style  # type: ignore[return-value]


@styled
def conversion_figure(run: RunData, kinetics: KineticsResult) -> str:
    """Conversion against residence time and against flow, one colour per temperature, with the fitted curves."""
    figure, (left, right) = new_figure(1, 2, (10.2, 4.1))
    temperatures = sorted({round(point.temperature_degC, 1) for point in run.points if _drawn(point)})
    for index, temperature in enumerate(temperatures):
        colour = COLOURS[index % len(COLOURS)]
        points = [p for p in run.points if _drawn(p) and round(p.temperature_degC, 1) == temperature]
        _scatter(left, points, [point.residence_time_s / 60.0 for point in points], colour)
        _scatter(right, points, [point.total_mL_min for point in points], colour)
        _curves(left, right, kinetics, temperature, points, colour)
    left.set_xlabel("residence time in the column / min")
    right.set_xlabel("total flow / (mL/min)")
    for axes in (left, right):
        axes.set_ylabel("conversion / %")
        axes.set_xlim(left=0)
        axes.set_ylim(0, _ceiling(run.points))
    handles, labels = left.get_legend_handles_labels()
    if handles:
        left.legend(handles, labels, loc="lower right", fontsize=8.5)
    _mark_simulated(figure, run.simulated)
    return svg_text(figure)


@styled
def timeline_figure(run: RunData) -> str:
    """Flow, pressure, temperature and conversion over time, phases shaded, trips marked."""
    panels = [(what, run.measured(what)) for what in ("flow", "pressure", "temperature", "fraction")]
    panels = [(what, traces) for what, traces in panels if traces] or [("pressure", ())]
    figure, rows = new_figure(len(panels), 1, (10.2, 1.0 + 1.75 * len(panels)), sharex=True, squeeze=False)
    scale, unit = (3600.0, "h") if run.duration_s > 3 * 3600 else (60.0, "min")
    for index, (what, traces) in enumerate(panels):
        axes = rows[index][0]
        _shade(axes, run.phases, scale, run.duration_s, names=index == 0)
        for number, trace in enumerate(traces):
            _line(axes, trace, number, scale)
        _limits(axes, run, traces)
        _trips(axes, run, scale)
        axes.set_ylabel(f"{_TITLES[what]} / {_unit(what, traces)}")
        axes.grid(visible=False, axis="x")
        if what in ("flow", "pressure"):
            axes.set_ylim(bottom=0)
        if what == "fraction":
            _collections(axes, run.points, scale)
        if traces:
            axes.legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), fontsize=8, handlelength=1.2)
    rows[-1][0].set_xlabel(f"time since the start / {unit}")
    rows[-1][0].set_xlim(0, max(run.duration_s, 1.0) / scale)
    _mark_simulated(figure, run.simulated)
    return svg_text(figure)


def thinned(t_s: NDArray[np.float64], value: NDArray[np.float64], bins: int = PIXELS) -> tuple[Any, Any]:
    """At most ``2 * bins`` points of a curve: first the smallest then the largest of each bin, in time order."""
    if len(t_s) <= 2 * bins:
        return t_s, value
    edges = np.linspace(0, len(t_s), bins + 1).astype(int)
    keep: list[int] = []
    for start, end in pairwise(edges):
        part = value[start:end]
        if np.isfinite(part).any():
            keep.extend(sorted({start + int(np.nanargmin(part)), start + int(np.nanargmax(part))}))
        else:
            keep.append(int(start))
    return t_s[keep], value[keep]


_NAMESPACES = 'xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink"'
_TITLES = {"flow": "flow", "pressure": "pressure", "temperature": "temperature", "fraction": "conversion"}
_PHASE_TINTS = ("#eef2f5", "#ffffff")
_SWEEP_TINTS = ("#e3edf3", "#f4f8fa")


def _drawn(point: PointRow) -> bool:
    return math.isfinite(point.conversion) and point.kind != "blank" and point.total_mL_min > 0


def _scatter(axes: Axes, points: Sequence[PointRow], x: Sequence[float], colour: str) -> None:
    """Filled: settled; open: a return to an earlier point; cross: collected unsettled."""
    for point, place in zip(points, x, strict=True):
        error = 100 * point.conversion_sd if math.isfinite(point.conversion_sd) else None
        marker = "o" if point.settled else "X"
        face = "white" if point.kind == "return" else colour
        axes.errorbar(
            place, 100 * point.conversion, yerr=error, fmt=marker, color=colour, markerfacecolor=face,
            markersize=6.5, capsize=3.5, elinewidth=1.2, zorder=3,
        )  # fmt: skip


def _curves(left: Axes, right: Axes, kinetics: KineticsResult, temperature: float, points: Any, colour: str) -> None:
    fit = next((one for one in kinetics.fits if one.temperature_degC == temperature), None)
    if fit is None or not points:
        left.plot([], [], "o", color=colour, label=f"{temperature:g} °C")
        return
    k, error = fit.fit.k, fit.fit.k_error
    label = f"k({temperature:g} °C) = {with_error(k, error)} {fit.fit.unit}\n({fit.fit.law.value})"
    volume_mL = float(np.median([p.residence_time_s * p.total_mL_min / 60.0 for p in points]))
    flows = np.array([p.total_mL_min for p in points])
    wanted = np.linspace(0.9 * flows.min(), 1.08 * flows.max(), 150)
    for curve, style, name in ((fit.curve, "-", label), (fit.even, (0, (3, 3)), f"at exactly {temperature:g} °C")):
        if curve:
            tau, height = np.array(curve).T
            look: dict[str, Any] = {"color": colour, "linewidth": 1.5 if style == "-" else 1.0, "linestyle": style}
            left.plot(tau / 60.0, 100 * height, label=name, **look)
            right.plot(wanted, np.interp(60.0 * volume_mL / wanted, tau, 100 * height), **look)


def with_error(value: float, error: float) -> str:
    """A value with its standard error, both to the error's second digit: ``(1.63 ± 0.05)·10⁻³``.

    >>> with_error(0.0016251, 0.0000482)
    '(1.625 ± 0.048)·10⁻³'
    """
    if not (math.isfinite(value) and math.isfinite(error)) or value <= 0:
        return "not determined"
    power = math.floor(math.log10(value))
    scaled, scaled_error = value / 10.0**power, error / 10.0**power
    digits = 3 if scaled_error <= 0 else max(0, min(6, 1 - math.floor(math.log10(scaled_error))))
    tail = "" if power == 0 else f"·10{str(power).translate(_SUPERSCRIPT)}"
    return f"({scaled:.{digits}f} ± {scaled_error:.{digits}f}){tail}"


_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def _ceiling(points: Sequence[PointRow]) -> float:
    highest = max((100 * (p.conversion + (p.conversion_sd or 0)) for p in points if _drawn(p)), default=100.0)
    return min(105.0, 10.0 * math.ceil((highest + 8.0) / 10.0)) if math.isfinite(highest) else 105.0


def _line(axes: Axes, trace: Trace, number: int, scale: float) -> None:
    """Second, fourth ... lines are dashed: equal flows lie on each other."""
    factor = 100.0 if trace.measures == "fraction" else 1.0
    t_s, value = thinned(trace.t_s, trace.value * factor)
    axes.plot(
        t_s / scale, value, color=COLOURS[number % len(COLOURS)], linewidth=1.1, label=trace.tag,
        linestyle=(0, (4, 2.5)) if number % 2 else "-",
        drawstyle="steps-post" if trace.measures == "flow" else "default",
    )  # fmt: skip


def _unit(what: str, traces: Sequence[Trace]) -> str:
    if what == "fraction":
        return "%"
    unit = traces[0].unit if traces else ""
    return {"degC": "°C", "mL/min": "(mL/min)"}.get(unit, unit)


def _shade(axes: Axes, phases: Sequence[PhaseSpan], scale: float, duration_s: float, names: bool) -> None:
    """Alternating tints; the sweep's points in their own; names above the first panel where there is room."""
    merged = _merged(phases)
    for index, phase in enumerate(merged):
        tints = _SWEEP_TINTS if phase.point else _PHASE_TINTS
        axes.axvspan(phase.start_s / scale, phase.end_s / scale, color=tints[index % 2], linewidth=0, zorder=0)
        if index:
            axes.axvline(phase.start_s / scale, color="#b7c1c8", linewidth=0.5, zorder=0.5)
        if names:
            wide = (phase.end_s - phase.start_s) / max(duration_s, 1.0)
            text = phase.point or phase.label
            middle = (phase.start_s + phase.end_s) / 2 / scale
            turn = 0 if wide > 0.012 * len(text) else 60
            if wide > 0.008:
                axes.annotate(
                    text, (middle, 1.02), xycoords=("data", "axes fraction"), fontsize=7.5, rotation=turn,
                    ha="left" if turn else "center", va="bottom", color=INK,
                )  # fmt: skip


def _merged(phases: Sequence[PhaseSpan]) -> list[PhaseSpan]:
    """Neighbouring spans of the same point (settling, collecting) or of the same phase as one."""
    merged: list[PhaseSpan] = []
    for phase in phases:
        before = merged[-1] if merged else None
        if before and ((phase.point and phase.point == before.point) or (not phase.point and phase.id == before.id)):
            merged[-1] = PhaseSpan(before.id, before.label, before.point, before.start_s, phase.end_s)
        else:
            merged.append(phase)
    return [phase for phase in merged if phase.end_s > phase.start_s]


def _limits(axes: Axes, run: RunData, traces: Sequence[Trace]) -> None:
    """High limits of the interlocks on the traces shown, when they are near enough to be seen in scale."""
    if run.rig is None:
        return
    shown = {trace.tag for trace in traces}
    top = max((trace.peak for trace in traces if math.isfinite(trace.peak)), default=0.0)
    limits = {
        cause.limit
        for lock in run.rig.interlocks
        for cause in lock.causes
        if cause.kind == "high" and cause.tag in shown
    }
    for limit in sorted(limits):
        if 0 < limit <= 2.5 * max(top, 0.1):
            axes.axhline(limit, color="#a33b52", linewidth=0.9, linestyle=(0, (5, 3)), label="trip limit")


def _collections(axes: Axes, points: Sequence[PointRow], scale: float) -> None:
    """Bars at the foot of the panel: when a fraction went into the flask."""
    spans = [(p.collect_start_s / scale, p.collect_end_s / scale) for p in points if math.isfinite(p.collect_end_s)]
    for index, (start, end) in enumerate(spans):
        label = "collected" if index == 0 else None
        axes.axvspan(start, end, ymin=0.0, ymax=0.045, color="#3a7d44", linewidth=0, zorder=4, label=label)


def _trips(axes: Axes, run: RunData, scale: float) -> None:
    trips = [event for event in run.events if event.kind is EventKind.TRIP]
    for index, event in enumerate(trips):
        axes.axvline(event.t_ns / 1e9 / scale, color="#a3122f", linewidth=1.4, label="trip" if index == 0 else None)


def _mark_simulated(figure: Figure, simulated: bool) -> None:
    """A figure that is cut out of the page must still say what it is."""
    if simulated:
        figure.text(
            0.995, 0.995, "SIMULATED", ha="right", va="top", fontsize=10, fontweight="bold", color="#a3122f",
        )  # fmt: skip


def new_figure(rows: int, columns: int, size: tuple[float, float], **options: Any) -> tuple[Figure, Any]:
    from matplotlib.figure import Figure

    figure = Figure(figsize=size, layout="constrained")
    return figure, figure.subplots(rows, columns, **options)


def svg_text(figure: Figure) -> str:
    buffer = io.StringIO()
    figure.savefig(buffer, format="svg", metadata={"Date": None, "Creator": None})
    text = buffer.getvalue()
    body = text[text.index("<svg") :]
    return re.sub(r'<svg [^>]*?(viewBox="[^"]*")[^>]*>', rf'<svg {_NAMESPACES} \1 role="img">', body, count=1)
