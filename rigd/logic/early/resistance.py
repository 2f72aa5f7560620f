"""Hydraulic resistance of each stretch, learned while solvent flows and watched from then on.

Learned: pressure drop against what the geometry predicts for lines and beds (``line``), from up to ``LEVELS`` steady
flows and temperatures of solvent. The prior is wide, so that the first one decides and the next tell offset, lines and
beds apart.
Judged: the drop over the learned one is 1 in health; within the band that sensors and learning are worth it is exactly
1, so that a small flow in a wide path says nothing rather than something wrong.

Another liquid has another viscosity. Until it has filled the path everything between the old and the new is healthy,
within ``TOLERANCE`` of what the property sets say; then its own factor is learned, once. What clogs in that time is
seen less sharply, and the absolute limits stand behind it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from statistics import median

from rigd.logic.early.line import LearnedSum, prior
from rigd.logic.early.outlook import History, remembered, time_left_s
from rigd.logic.early.path import Stretch
from rigd.logic.early.scene import NOTHING_FLOWS, Mixture, Predicted, Scene
from rigd.model.events import Event, EventKind
from rigd.model.samples import Sample

LEVELS = 8
OTHER_LEVEL = 0.25
DOUBT_LINES, DOUBT_BEDS = 1.0, 10.0
"""How far the geometry may be from the truth, one standard deviation of the factor: bores have tolerances, beds have
frits and fines (common practice, no source)."""
OTHER_FLOW = 0.05
TOLERANCE = 1.5
REGULATOR = 0.2
"""What a back-pressure regulator may keep more or less than its set pressure, of it (common practice, no source)."""
SETTLE_S = 15.0
LOOKS = 3
SIGMAS = 3.0
FILLED = 2.0
"""A liquid has filled the path when this many of its volumes have passed."""
FAR_S = 86_400.0


@dataclass(frozen=True, slots=True)
class Watched:
    """What is known of one stretch.

    ``looks`` are the last drops, ``predicted`` what the geometry says; ``factors`` are those of other
    liquids, ``before`` the one that filled the path last; ``at_bar`` is the drop at which ``history`` was last added
    to; ``lefts`` are the last times left [s]; ``remark`` says in words what the last ratio means.
    """

    line: LearnedSum
    levels: tuple[Predicted, ...] = ()
    open: bool = True
    looks: tuple[float, ...] = ()
    predicted: Predicted = NOTHING_FLOWS
    factors: Mapping[Mixture, float] = field(default_factory=dict)
    before: float = 1.0
    history: History = ()
    at_bar: float = 0.0
    lefts: tuple[float, ...] = ()
    remark: str = ""


def initial(stretch: Stretch) -> Watched:
    """Nothing learned: the geometry, with all doubt."""
    offset = REGULATOR * stretch.kept_bar + stretch.band_bar
    return Watched(prior(stretch.kept_bar, offset, DOUBT_LINES, DOUBT_BEDS))


def watch(scene: Scene, stretch: Stretch, known: Watched) -> tuple[Watched, tuple[Sample, ...], tuple[Event, ...]]:
    """One look at a stretch: what is known then, the values to show, and what was learned."""
    upper, lower = scene.mean(stretch.upper), scene.mean(stretch.lower) if stretch.lower else 0.0
    predicted = scene.predicted(stretch)
    if (
        upper is None
        or lower is None
        or predicted.cold + predicted.warm <= 0.0
        or scene.steady_s < _settle_s(scene, stretch, upper)
    ):
        return (replace(known, looks=()) if known.looks else known), (), ()
    moved = _differ(predicted.warm, known.predicted.warm, OTHER_FLOW)  # a bed that warms at once, or another flow
    looks = () if moved else known.looks[1 - LOOKS :]
    known = replace(known, looks=(*looks, upper - lower), predicted=predicted)
    if len(known.looks) < LOOKS:
        return known, (), ()
    known, events = _learn(scene, stretch, known)
    if not known.levels:
        return known, (), events
    known, more = _learn_liquid(scene, stretch, known)
    known, samples = _judge(scene, stretch, known)
    return known, samples, events + more


def _settle_s(scene: Scene, stretch: Stretch, upper_bar: float) -> float:
    """Five time constants R C after a step, at least ``SETTLE_S``."""
    flow = sum(scene.flows.get(pump, 0.0) for pump in stretch.pumps)
    excess_bar = max(upper_bar - stretch.kept_bar, 0.0)
    return SETTLE_S + 5.0 * 60.0 * scene.program.early.compliance_mL_bar * excess_bar / max(flow, 1e-6)


def _learn(scene: Scene, stretch: Stretch, known: Watched) -> tuple[Watched, tuple[Event, ...]]:
    """Take this flow as one more point of the line, while only solvent has flowed and the path is full of it."""
    if not known.open:
        return known, ()
    filled = scene.passed_mL >= scene.program.early.wetted_mL
    if known.levels and not scene.solvent:
        return replace(known, open=False), ()
    drop, seen, line = median(known.looks), known.predicted, known.line
    new = all(_differ(seen.cold, level.cold) or _differ(seen.warm, level.warm) for level in known.levels)
    if not filled or not new:
        return known, ()
    doubt = SIGMAS * max(line.spread(seen.cold, seen.warm), stretch.band_bar)
    if known.levels and abs(drop - line.offset - line.flowing(seen.cold, seen.warm)) > doubt:
        return known, ()
    unsure = line.weights[1] * (seen.cold_high - seen.cold_low) / 2.0
    line = line.learned(seen.cold, seen.warm, drop, math.hypot(stretch.band_bar / SIGMAS, unsure))
    levels = (*known.levels, seen)
    factors = known.factors if scene.solvent else {scene.mixture: 1.0}
    event = _learned(scene, stretch, line, drop)
    return replace(known, line=line, levels=levels, open=len(levels) < LEVELS, factors=factors), (event,)


def _differ(one: float, other: float, share: float = OTHER_LEVEL) -> bool:
    return abs(one - other) > share * max(one, other)


def _learned(scene: Scene, stretch: Stretch, line: LearnedSum, drop: float) -> Event:
    flow = sum(scene.flows.get(pump, 0.0) for pump in stretch.pumps)
    text = f"The path {stretch.words} takes {drop:.3f} bar at {flow:.3g} mL/min: later pressures are compared with it."
    fields: dict[str, str | float | int | bool] = {
        "value": round(drop, 4), "unit": "bar", "flow_mL_min": round(flow, 4),
        "offset_bar": round(line.offset, 4), "lines": round(line.weights[1], 4), "beds": round(line.weights[2], 4),
    }  # fmt: skip
    return Event(EventKind.MEASUREMENT, f"resistance {stretch.upper}", scene.now_ns, text, fields)


def _range(scene: Scene, known: Watched) -> tuple[float, float]:
    """Least and most that a healthy path may resist now, over solvent: one factor once its liquid has filled it."""
    if scene.program.early.viscosity is None:  # nobody knows what the temperature does to it
        return scene.program.early.tolerance
    own = 1.0 if scene.solvent else known.factors.get(scene.mixture)
    filled = scene.passed_mL >= FILLED * scene.program.early.wetted_mL
    if own is not None and filled:
        return own, own
    low, high = (own, own) if own is not None else scene.program.early.tolerance
    return min(low, known.before), max(high, known.before)


def _learn_liquid(scene: Scene, stretch: Stretch, known: Watched) -> tuple[Watched, tuple[Event, ...]]:
    """Learn the factor of a liquid that fills the path for the first time, if its flow says enough about it."""
    if scene.passed_mL < FILLED * scene.program.early.wetted_mL:
        return known, ()
    if scene.solvent or scene.mixture in known.factors:
        factor = 1.0 if scene.solvent else known.factors[scene.mixture]
        return (known if known.before == factor else replace(known, before=factor)), ()
    line, seen = known.line, known.predicted
    healthy = line.flowing(seen.cold, seen.warm)
    factor = (median(known.looks) - line.offset) / healthy
    low, high = _range(scene, known)
    doubtful = max(stretch.band_bar, SIGMAS * line.spread(seen.cold, seen.warm)) > 0.5 * healthy
    if doubtful or not low <= factor <= high:
        return known, ()
    return replace(known, factors={**known.factors, scene.mixture: factor}, before=factor), ()


def _judge(scene: Scene, stretch: Stretch, known: Watched) -> tuple[Watched, tuple[Sample, ...]]:
    """The ratio, the time that is left, and both in words."""
    line, seen = known.line, known.predicted
    drop, offset = median(known.looks), line.offset
    low, high = _range(scene, known)
    least, most = low * line.flowing(seen.cold_low, seen.warm), high * line.flowing(seen.cold_high, seen.warm)
    band = max(stretch.band_bar, SIGMAS * line.spread(seen.cold_high, seen.warm))
    ratio = 1.0
    if drop > offset + most + band:
        ratio = (drop - offset) / most
    elif drop < offset + least - band:
        ratio = max(0.0, (drop - offset) / least)
    if ratio > 1.0:
        known = _remember(known, scene.now_ns, ratio, most)
    elif known.history:
        known = replace(known, history=())
    left_s, limit = _left(scene, stretch, known.history, most)
    known = replace(known, lefts=(*known.lefts[1 - LOOKS :], left_s))
    left_s = median(known.lefts)
    words = f", {_time(left_s)} to {limit:g} bar at this rate" if left_s < FAR_S else ""
    known = replace(known, remark=_remark(ratio, words))
    shown = {f"{stretch.upper}.resistance": ratio}
    if left_s < FAR_S or f"{stretch.upper}.time-left" in scene.samples:
        shown[f"{stretch.upper}.time-left"] = left_s
    tags = scene.program.tags
    return known, tuple(Sample(tag, value, scene.now_ns) for tag, value in shown.items() if tag in tags)


def _remember(known: Watched, now_ns: int, ratio: float, most_bar: float) -> Watched:
    """Add to the history. At another flow the ratio is read with another error: what was before is moved to it, so
    that only growth at one flow counts as growth."""
    history = known.history
    if history and abs(most_bar - known.at_bar) > OTHER_FLOW * most_bar:
        step = ratio - history[-1][1]
        history = tuple((t_ns, value + step) for t_ns, value in history)
    return replace(known, history=remembered(history, now_ns, ratio), at_bar=most_bar)


def _left(scene: Scene, stretch: Stretch, history: History, healthy_bar: float) -> tuple[float, float]:
    """Seconds until the first trip limit at this rate (``FAR_S`` when none is in sight), and that limit [bar]."""
    room = [(limit - value, limit) for tag, limit in stretch.limits if (value := scene.value(tag)) is not None]
    if not history or not room:
        return FAR_S, 0.0
    least, limit = min(room)
    left_s = time_left_s(history, history[-1][1] + max(least, 0.0) / healthy_bar, scene.now_ns)
    return FAR_S if left_s is None else min(left_s, FAR_S), limit


def _time(seconds: float) -> str:
    if seconds < 90.0:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 5400.0 else f"{seconds / 3600.0:.1f} h"


def _remark(ratio: float, left: str) -> str:
    if ratio == 1.0:
        return "resistance as learned"
    change = ratio - 1.0
    if change > 2.0:
        return f"resistance {ratio:.2g} times what was learned{left}"
    return f"resistance {'up' if change > 0 else 'down'} {100 * abs(change):.0f} % since it was learned{left}"
