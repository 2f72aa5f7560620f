"""Switchover: every pump to the other kind of liquid, so timed that the fronts meet where the streams join.

To reagent: each syringe is rinsed with it, the next one is charged, and the rest of the old liquid runs out; a pump
changes over by itself the moment its active syringe is empty. The front then has to pass the pump's outlet line. What
is left of the old liquid plus that line, over the flow, is the time to the merge; a pump with less of it than another
waits, so that all arrive together. To solvent: the same, without waiting for anything.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from rigd.logic.conduct.conditioning import lead
from rigd.logic.conduct.doses import Dose, Dosing, dose_all, dose_due_ns
from rigd.logic.conduct.layout import Layout, PumpLayout
from rigd.logic.conduct.pumps import EMPTY_mL, PumpTrack
from rigd.logic.conduct.shares import reagent_flows, rinse_doses, solvent_flows
from rigd.logic.conduct.wants import Move, Scene, Want, Wants
from rigd.model.recipe import Point, PointKind

_TOGETHER_S = 0.02
_APART_S = 2.0


@dataclass(frozen=True, slots=True)
class Memory:
    """``stage``: rinse, charge, meet. ``started``: pumps that have been let go in the last stage.

    ``kept``: pumps that had the right liquid in a syringe at the beginning, ``right_line``: in the line as well.
    """

    stage: str = "rinse"
    rinses: Mapping[str, Dosing] = field(default_factory=dict)
    started: frozenset[str] = frozenset()
    kept: frozenset[str] = frozenset()
    right_line: frozenset[str] = frozenset()


def flows_of(layout: Layout, reagent: bool, slow: float = 1.0, point: Point | None = None) -> dict[str, float]:
    """Flows during a switchover: the recipe's total, shared as the next point shares it; equal for solvent."""
    rule = layout.recipe.switchover
    total = (rule.total_mL_min if rule else layout.rig.flush_mL_min) * slow
    if not reagent:
        return solvent_flows(layout, total)
    planned = point or next((one for one in layout.recipe.points if one.kind is not PointKind.BLANK), None)
    shares = planned.flows_mL_min if planned else dict.fromkeys(layout.pumps, 1.0)
    return reagent_flows(layout, shares, total)


def step(scene: Scene, memory: Memory) -> Move[Memory]:
    """Rinse, charge, then let the fronts meet."""
    flows = flows_of(scene.layout, scene.spec.reagent, scene.spec.slow, scene.spec.point)
    if memory.stage == "rinse":
        return _rinse(scene, memory, flows)
    if memory.stage == "charge":
        return _charge(scene, memory, flows)
    return _meet(scene, memory, flows)


def label(play: PumpLayout, reagent: bool) -> str:
    """What a pump shall deliver: its reagent, or its solvent; a pump with one liquid delivers that."""
    return (play.reagent or play.solvent) if reagent else (play.solvent or play.reagent)


def _wants(scene: Scene, wants: Mapping[str, Want], **options: bool) -> Wants:
    return Wants(wants, scene.layout.recipe.collect.waste_position, **options)


def _rinse(scene: Scene, memory: Memory, flows: Mapping[str, float]) -> Move[Memory]:
    doses = _doses(scene, memory, flows)
    quick = _rinse_flows(scene, flows)
    dosing, wants, done = dose_all(scene, doses, memory.rinses, quick)
    memory = replace(memory, rinses=dosing, stage="charge" if done else "rinse")
    if done and scene.spec.reagent:
        return _charge(scene, memory, flows)
    if done:
        return _meet(scene, replace(memory, stage="meet"), flows)
    return Move(memory, _wants(scene, wants), "rinsing", due_ns=dose_due_ns(scene, doses, dosing, quick))


def _rinse_flows(scene: Scene, flows: Mapping[str, float]) -> dict[str, float]:
    """After a hold reagent is slowed down; solvent that has to run out first is not."""
    full = flows_of(scene.layout, scene.spec.reagent, 1.0, scene.spec.point)
    on_solvent = {name for name in flows if scene.tracks[name].active == scene.layout.pumps[name].solvent}
    return {name: full[name] if name in on_solvent else flow for name, flow in flows.items()}


def _doses(scene: Scene, memory: Memory, flows: Mapping[str, float]) -> dict[str, tuple[Dose, ...]]:
    """Rinses of each syringe; fewer when the line from the valve or a syringe holds the right liquid already."""
    rule = scene.layout.recipe.switchover
    rinses = rule.rinses if rule else 0
    doses = rinse_doses(scene.layout, rinses, scene.spec.reagent, flows)
    for name in doses:
        if name in memory.right_line:
            doses[name] = ()
        elif name in memory.kept:
            doses[name] = doses[name][:1]
    return doses


def start(scene: Scene) -> Memory:
    """At the beginning: what is right already. After a hold a syringe still holds reagent, the line does not."""
    plays, tracks = scene.layout.pumps, scene.tracks
    wanted = {name: label(play, scene.spec.reagent) for name, play in plays.items()}
    kept = {name for name, want in wanted.items() if tracks[name].supply_mL(want, scene.now_ns) > EMPTY_mL}
    lines = {name for name in kept if tracks[name].drawn == wanted[name]}
    return Memory(kept=frozenset(kept), right_line=frozenset(lines))


def _charge(scene: Scene, memory: Memory, flows: Mapping[str, float]) -> Move[Memory]:
    """Fill what will follow, at rest: there is solvent in the bed."""
    wants = {name: _want(scene, name, 0.0, flows) for name in flows}
    ready = [_charged(scene.layout.pumps[name], scene.tracks[name], wants[name], scene.now_ns) for name in flows]
    if all(ready):
        return _meet(scene, replace(memory, stage="meet"), flows)
    return Move(memory, _wants(scene, _running_out(scene, wants, flows)), "charging the syringes")


def _running_out(scene: Scene, wants: dict[str, Want], flows: Mapping[str, float]) -> dict[str, Want]:
    """A pump that cannot be charged before its syringe is run out runs it out; the others rest."""
    found = {}
    for name, want in wants.items():
        play, track = scene.layout.pumps[name], scene.tracks[name]
        blocked = not play.dual or (track.standby not in ("", want.label) and track.standby_mL > EMPTY_mL)
        run_out = blocked and track.active != want.label and track.fill is None
        found[name] = replace(want, flow_mL_min=flows[name]) if run_out else want
    return found


def _charged(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> bool:
    """True when the new liquid is at hand, in the amount that one filling can give, and nothing is being filled."""
    wanted_mL = 0.5 * min(want.need_mL, play.pump.stroke_mL)
    return track.fill is None and track.supply_mL(want.label, now_ns) >= wanted_mL


def _want(scene: Scene, name: str, flow: float, flows: Mapping[str, float]) -> Want:
    """The new liquid, for what the coming phases need of it."""
    play = scene.layout.pumps[name]
    need_mL = play.feed.outlet_mL + 0.2
    later_mL = scene.later_mL(name, need_mL, flows[name])
    if later_mL == 0.0 and name in scene.following_mL:
        later_mL = play.pump.stroke_mL  # not even one phase fits into a syringe: as much as it holds
    need_mL += later_mL
    level_mL = min(lead(play, flows[name], need_mL), need_mL) if play.dual else 0.0
    return Want(label(play, scene.spec.reagent), flow, need_mL, level_mL=level_mL)


def _meet(scene: Scene, memory: Memory, flows: Mapping[str, float]) -> Move[Memory]:
    left = {name: _arrival_s(scene, name, flows) for name in flows}
    rule = scene.layout.recipe.switchover
    stagger = scene.spec.reagent and rule is not None and rule.stagger
    last_s = max(left.values(), default=0.0)
    started = {name for name in left if not stagger or _lets_go(left[name], last_s, name in memory.started)}
    wants = {name: _want(scene, name, flow if name in started else 0.0, flows) for name, flow in flows.items()}
    waits = [last_s - seconds for name, seconds in left.items() if name not in started]
    due_s = min([*waits, last_s])
    return Move(
        replace(memory, started=frozenset(started)),
        _wants(scene, wants, together=stagger and len(started) == len(left)),
        "running the old liquid out" if last_s > 0 else "fronts have met",
        done=last_s <= 0.0,
        due_ns=scene.now_ns + int(due_s * 1e9) + 1_000_000,
        left_s=last_s,
    )


def _lets_go(left_s: float, last_s: float, already: bool) -> bool:
    """A pump starts when its own time is as long as the longest left; it pauses only when far ahead."""
    return left_s >= last_s - (_APART_S if already else _TOGETHER_S)


def _arrival_s(scene: Scene, name: str, flows: Mapping[str, float]) -> float:
    """Time until the front of this pump is where the last streams join, at the flows of the switchover."""
    play, track, flow = scene.layout.pumps[name], scene.tracks[name], flows[name]
    wanted = label(play, scene.spec.reagent)
    delivered_mL = track.delivered_at(scene.now_ns)
    if track.active == wanted:
        missing_mL = track.front.to_merge_mL(play.feed, delivered_mL)
        beyond_mL = max(0.0, track.front.travelled_mL(delivered_mL) - play.feed.outlet_mL)
    else:
        missing_mL, beyond_mL = track.level_at(scene.now_ns) + play.feed.outlet_mL, 0.0
        if track.standby != wanted and play.dual:
            missing_mL += track.standby_mL
    reach_s = 60.0 * missing_mL / flow + _trunk_s(scene.layout, play.feed.merge, flows)
    return max(0.0, reach_s - 60.0 * beyond_mL / flow) + _ramp_loss_s(scene, track)


def _ramp_loss_s(scene: Scene, track: PumpTrack) -> float:
    """Time that a pump still loses by starting slowly."""
    ramp = scene.layout.recipe.ramp
    moved_s = 0.0 if track.moving_ns < 0 else (scene.now_ns - track.moving_ns) / 1e9
    return (1.0 - ramp.fraction_first) * max(0.0, ramp.step_s - moved_s)


def _trunk_s(layout: Layout, merge: str, flows: Mapping[str, float]) -> float:
    """Time from a merge to the last one, where all streams have joined."""
    seconds, inside = 0.0, False
    joins = [section.segments[0].id if section.segments else "" for section in layout.path.sections]
    for first, section in zip(joins[:-1], layout.path.sections[:-1], strict=True):
        inside = inside or first == merge
        flow = sum(flows.get(pump, 0.0) for pump in section.pumps)
        if inside and flow > 0:
            seconds += 60.0 * section.volume_mL / flow
    return seconds
