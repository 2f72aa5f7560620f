"""What went from which vessel to which, counted from the pumps' own counters and the valves' reported positions.

Drawn: the rise of (active syringe + standby syringe + delivered), from the vessel behind the feed valve's position.
Delivered: the rise of the counter, to the vessel behind the outlet valve's position. Nothing is taken from what was
ordered. A valve on its way counts as where it was last seen.
Also kept: whether each syringe can hold anything but solvent. It holds solvent when it was filled from empty by an
order given after the feed valve had reported solvent, and the valve has stayed there. Not known is reagent.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from enum import StrEnum
from typing import TYPE_CHECKING

from rigd.logic.arbitration import Aspect, Memory
from rigd.logic.flow_path import SupplyLine
from rigd.model.orders import Action
from rigd.model.samples import Quality, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

QUANTUM_mL = 0.005
"""Counters are read with three decimals; what moves less has not moved."""

EMPTY_FRACTION = 0.02
"""A syringe with less than this part of its stroke left counts as empty."""

RESTART_mL = 0.05
"""A delivered counter that falls by more belongs to a pump that restarted."""


class Content(StrEnum):
    """What a syringe may hold."""

    EMPTY = "empty"
    SOLVENT = "solvent"
    REAGENT = "reagent"  # or not known


@dataclass(frozen=True, slots=True)
class Count:
    """One pump's counters as last read, and the high-water mark of its total [mL]."""

    level_mL: float
    standby_mL: float
    delivered_mL: float
    total_mL: float
    active: Content
    standby: Content


@dataclass(frozen=True, slots=True)
class Source:
    """Where a pump draws from: the line now (``None``: not known), since when, and the last one known."""

    line: SupplyLine | None
    since_ns: int
    last: SupplyLine | None


@dataclass(frozen=True, slots=True)
class Ledger:
    """Volumes [mL]: in each vessel, drawn of each liquid, delivered by each pump since the start.

    ``outlet`` is the vessel that the outlet leads to; ``shown`` once the volumes have been put into the image.
    """

    vessels: Mapping[str, float]
    used: Mapping[str, float] = field(default_factory=dict)
    delivered: Mapping[str, float] = field(default_factory=dict)
    counts: Mapping[str, Count] = field(default_factory=dict)
    sources: Mapping[str, Source] = field(default_factory=dict)
    outlet: str = ""
    shown: bool = False


def initial(program: Program) -> Ledger:
    """Vessels as declared, nothing drawn, syringes unknown."""
    vessels = {vessel.id: vessel.content_mL for vessel in program.rig.vessels}
    fixed = {feed.pump: program.supply[feed.pump].get("") for feed in program.path.feeds if not feed.valve}
    sources = {pump: Source(line, 0, line) for pump, line in fixed.items()}
    return Ledger(vessels, sources=sources, outlet="" if program.path.outlet_valve else program.drain.get("", ""))


def update(
    program: Program,
    ledger: Ledger,
    memory: Memory,
    samples: Mapping[str, Sample],
    taken: Iterable[str],
    now_ns: int,
) -> tuple[Ledger, dict[str, Sample]]:
    """Count on with new samples; returns the volume samples of the vessels that changed, at first of all."""
    after, moved = ledger, False
    keys = sorted((program.carries[tag][::-1], tag) for tag in program.counting.intersection(taken))
    for (channel, unit), tag in keys:  # volumes first: what was pumped went where the valve stood before
        if channel == "delivered":
            counted = _count(program, after, memory, samples, unit)
            moved = moved or counted.vessels is not after.vessels
            after = counted
        elif channel == "position":
            after = _switch(program, after, unit, samples[tag])
    if ledger.shown and not moved:
        return after, {}
    changed = [v for v, volume in after.vessels.items() if not ledger.shown or volume != ledger.vessels[v]]
    named = ((f"{vessel}.volume", after.vessels[vessel]) for vessel in changed)
    shown = {tag: Sample(tag, volume, now_ns) for tag, volume in named if tag in program.tags}
    return (after if after.shown else replace(after, shown=True)), shown


def _switch(program: Program, ledger: Ledger, valve: str, sample: Sample) -> Ledger:
    """Follow a valve: what the pumps behind it draw, or where the outlet leads."""
    if valve == program.path.outlet_valve:
        position = _position(program, valve, sample)
        vessel = program.drain.get(position, "")
        return ledger if not position or vessel == ledger.outlet else replace(ledger, outlet=vessel)
    sources = {}
    for feed in program.path.feeds:
        if feed.valve == valve:
            line = program.supply[feed.pump].get(_position(program, valve, sample))
            held = ledger.sources.get(feed.pump)
            if held is None or held.line is not line:
                sources[feed.pump] = Source(line, sample.t_ns, line or (held.last if held else None))
    return replace(ledger, sources={**ledger.sources, **sources}) if sources else ledger


def _position(program: Program, valve: str, sample: Sample) -> str:
    """Name of the position that a valve reports, "" when it is on its way, lost or not to be believed."""
    positions = program.valves[valve].positions
    index = int(sample.value) if sample.quality is not Quality.BAD else -1
    return positions[index] if 0 <= index < len(positions) else ""


def _count(program: Program, ledger: Ledger, memory: Memory, samples: Mapping[str, Sample], pump: str) -> Ledger:
    level = _value(program, samples, pump, "level")
    standby = _value(program, samples, pump, "standby") or 0.0
    delivered = _value(program, samples, pump, "delivered")
    if level is None or delivered is None:
        return ledger
    before = ledger.counts.get(pump)
    if before is None or delivered < before.delivered_mL - RESTART_mL:
        before = Count(level, standby, delivered, level + standby + delivered, Content.REAGENT, Content.REAGENT)
    rise = level + standby + delivered - before.total_mL
    drawn = rise if rise > QUANTUM_mL else 0.0
    out = max(0.0, delivered - before.delivered_mL)
    active, other = _contents(before, level, standby, _drawn(program, ledger, memory, pump))
    nothing_mL = EMPTY_FRACTION * program.pumps[pump].stroke_mL
    count = Count(
        level,
        standby,
        max(delivered, before.delivered_mL),
        before.total_mL + drawn,
        Content.EMPTY if level <= nothing_mL else active,
        Content.EMPTY if standby <= nothing_mL else other,
    )
    return _book(ledger, pump, count, drawn, out)


def _value(program: Program, samples: Mapping[str, Sample], pump: str, channel: str) -> float | None:
    sample = samples.get(program.feedback.get((pump, channel), ""))
    return None if sample is None or sample.quality is Quality.BAD else sample.value


def _book(ledger: Ledger, pump: str, count: Count, drawn: float, out: float) -> Ledger:
    """Enter a pump's new count, what it drew and what it delivered."""
    counts = {**ledger.counts, pump: count}
    vessels, used, delivered = ledger.vessels, ledger.used, ledger.delivered
    source = ledger.sources.get(pump)
    if drawn and source is not None and source.last is not None:
        line = source.last
        vessels = {**vessels, line.vessel: vessels.get(line.vessel, 0.0) - drawn}
        used = {**used, line.liquid: used.get(line.liquid, 0.0) + drawn}
    if out:
        delivered = {**delivered, pump: delivered.get(pump, 0.0) + out}
        if ledger.outlet:
            vessels = {**vessels, ledger.outlet: vessels.get(ledger.outlet, 0.0) + out}
    return Ledger(vessels, used, delivered, counts, ledger.sources, ledger.outlet, ledger.shown)


def _contents(before: Count, level: float, standby: float, drawn: Content) -> tuple[Content, Content]:
    """What the active and the standby syringe may hold after the move from the last counters to these."""
    active, other = before.active, before.standby
    if standby < before.standby_mL - QUANTUM_mL:  # only a change-over takes liquid from the standby syringe
        return other, active
    if standby > before.standby_mL + QUANTUM_mL:
        return active, _mixed(other, drawn)
    if level > before.level_mL + QUANTUM_mL:
        return _mixed(active, drawn), other
    return active, other


def _drawn(program: Program, ledger: Ledger, memory: Memory, pump: str) -> Content:
    """What a filling that goes on now draws: solvent only if the valve reported solvent before it was ordered."""
    held, told = ledger.sources.get(pump), memory.told.get((pump, Aspect.ONCE))
    if held is None or held.line is None or told is None:
        return Content.REAGENT
    ordered_there = told.order.action is Action.FILL and told.order.t_ns >= held.since_ns
    return Content.SOLVENT if ordered_there and program.is_solvent(held.line.liquid) else Content.REAGENT


def _mixed(held: Content, drawn: Content) -> Content:
    return drawn if held in (Content.EMPTY, drawn) else Content.REAGENT
