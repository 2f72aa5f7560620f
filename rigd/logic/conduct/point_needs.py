"""How much a point takes, and how its signal is judged: shared by the point's phase and by the plan."""

from __future__ import annotations

from rigd.logic.conduct.layout import Layout
from rigd.logic.settling import SettleRule
from rigd.model.recipe import Point


def share(point: Point, pump: str) -> float:
    """The pump's part of the total flow."""
    return point.flows_mL_min.get(pump, 0.0) / point.total_mL_min if point.total_mL_min > 0 else 0.0


def settle_mL(layout: Layout, point: Point, pump: str, volumes: float) -> float:
    """What a pump delivers while this many volumes of the trunk are exchanged."""
    return volumes * layout.path.residence_s(point.flows_mL_min) / 60.0 * point.flows_mL_min.get(pump, 0.0)


def collect_mL(layout: Layout, point: Point, pump: str) -> float:
    """What a pump delivers from the moment a point is settled until its fraction is complete."""
    return share(point, pump) * (layout.dead_mL + layout.recipe.collect.volume_mL)


def least_mL(layout: Layout, point: Point, pump: str, reagent: bool) -> float:
    """What a point takes of a pump at least: settling, the fraction, and the valve's travel."""
    flow = point.flows_mL_min.get(pump, 0.0)
    return flow * (settle_s(layout, point, reagent) + 6.0) / 60.0 + collect_mL(layout, point, pump)


def point_mL(layout: Layout, point: Point, pump: str, reagent: bool) -> float:
    """What is kept ready for a point: with patience for a signal gate that says no once or twice.

    Not for as long as the gate may take: what is left over keeps a syringe from being free for a flush.
    """
    again_s = 2.0 * layout.recipe.settle.persistence * _judged_every_s(layout, point) if gated(layout, reagent) else 0.0
    patience_s = max(0.1 * settle_s(layout, point, reagent), again_s)
    return least_mL(layout, point, pump, reagent) + point.flows_mL_min.get(pump, 0.0) * patience_s / 60.0


def another_try_mL(layout: Layout, point: Point, pump: str) -> float:
    """What it takes after a change-over of a pump: one exchange, a little patience, and the fraction."""
    return settle_mL(layout, point, pump, 1.5) + collect_mL(layout, point, pump)


def gated(layout: Layout, reagent: bool) -> bool:
    """True when the signal means something: there is reagent, and the rig has the tag."""
    return reagent and layout.recipe.settle.signal in layout.program.tags


def settle_s(layout: Layout, point: Point, reagent: bool) -> float:
    """Time to settle: the volumes, or the signal gate if that takes longer."""
    residence_s = layout.path.residence_s(point.flows_mL_min)
    by_signal_s = residence_s + signal_s(layout, point) if gated(layout, reagent) else 0.0
    return max(layout.recipe.settle.volumes * residence_s, by_signal_s)


def settle_rule(layout: Layout, point: Point) -> SettleRule:
    """The signal gate at this point's flow.

    The window should span about one residence time, so at slow flows several samples are averaged into one (which also
    takes them apart further than their noise remembers). The horizon is what is to come: dead volume and fraction.
    """
    rule, total = layout.recipe.settle, point.total_mL_min
    tag = layout.program.tags.get(rule.signal)
    period_s = tag.period_ns / 1e9 if tag else 1.0
    residence_s = layout.path.residence_s(point.flows_mL_min)
    horizon_s = 60.0 * (layout.dead_mL + layout.recipe.collect.volume_mL) / total
    block = max(1, int(residence_s / (rule.window * period_s)))
    return SettleRule(rule.tolerance, horizon_s, rule.window, rule.persistence, block)


def signal_s(layout: Layout, point: Point) -> float:
    """Time that the signal gate takes at least, counted from the first exchange of the trunk."""
    rule = settle_rule(layout, point)
    return (rule.window + rule.persistence - 1) * _judged_every_s(layout, point)


def gate_s(layout: Layout, point: Point, waited_s: float = 0.0) -> float:
    """When the signal gate is likely to open, from the right streams on: a window after the old liquid and the warming.

    The bed has already had ``waited_s`` at the point's flows before.
    """
    exchanged_s = layout.path.residence_s(point.flows_mL_min) + _judged_every_s(layout, point)
    return max(exchanged_s, layout.warming_s - waited_s) + signal_s(layout, point)


def _judged_every_s(layout: Layout, point: Point) -> float:
    tag = layout.program.tags.get(layout.recipe.settle.signal)
    return settle_rule(layout, point).block * (tag.period_ns / 1e9 if tag else 1.0)
