"""Where a point gets its liquid: which syringe, filled when and how far, so that no refill or change-over spoils it.

A change-over disturbs the streams for a moment, so one exchange of the trunk must follow it before a fraction is taken.
What is left in a syringe from the point before runs out early in the settling; the standby one, filled just before with
what the point takes, gives the rest and leaves its neighbour empty, free for a flush with solvent.
"""

from __future__ import annotations

from dataclasses import replace

from rigd.logic.conduct.charging import lead_mL
from rigd.logic.conduct.conditioning import NEVER_NS
from rigd.logic.conduct.point_memory import Memory
from rigd.logic.conduct.point_needs import another_try_mL, collect_mL, least_mL, point_mL, settle_mL
from rigd.logic.conduct.switchover import label
from rigd.logic.conduct.wants import Scene, Want, Wants
from rigd.model.recipe import Point


def point_wants(scene: Scene, memory: Memory, point: Point, outlet: str) -> Wants:
    """What every pump of the point, the outlet and the bath should be doing now; a short syringe sets all anew."""
    names = [name for name in point.flows_mL_min if name in scene.layout.pumps]
    again = memory.step in ("set", "settle") and any(_short(scene, memory, point, name) for name in names)
    pumps = {name: _want(scene, memory, point, name, again) for name in names}
    return Wants(pumps, outlet, point.temperature_degC, together=True)


def _short(scene: Scene, memory: Memory, point: Point, name: str) -> bool:
    """True when an active syringe no longer holds the fraction and it is too late to wait for a change-over."""
    if point.flows_mL_min[name] <= 0 or (scene.layout.pumps[name].dual and not _late(scene, memory, point, name)):
        return False
    return scene.tracks[name].level_at(scene.now_ns) < _fraction_mL(scene, point, name)


def _fraction_mL(scene: Scene, point: Point, name: str) -> float:
    """Level that is needed to collect without a change-over."""
    return collect_mL(scene.layout, point, name) + scene.layout.pumps[name].guard_mL(point.flows_mL_min[name])


def _late(scene: Scene, memory: Memory, point: Point, name: str) -> bool:
    """True when the one exchange that must follow a change-over would cost time."""
    return _until_last_change_mL(scene, memory, point, name) <= 0.0


def _until_last_change_mL(scene: Scene, memory: Memory, point: Point, name: str) -> float:
    """What a pump may still deliver before a change-over begins to cost time: one exchange must follow it."""
    volumes = scene.layout.recipe.settle.volumes - 1.1
    return settle_mL(scene.layout, point, name, max(volumes, 0.3)) - _passed_of(scene, memory, name)


def _passed_of(scene: Scene, memory: Memory, name: str) -> float:
    return scene.since_mL(memory.marks).get(name, 0.0) if memory.marks else 0.0


def _want(scene: Scene, memory: Memory, point: Point, name: str, again: bool) -> Want:
    """Liquid for this point; refills and change-overs only where they do no harm.

    ``again``: a pump ran short at the end; all that cannot give another exchange and the fraction are charged together.
    """
    layout, play = scene.layout, scene.layout.pumps[name]
    liquid, flow = label(play, scene.spec.reagent), point.flows_mL_min[name]
    if flow <= 0:
        return Want(liquid, may_fill=False)
    if memory.step not in ("set", "settle"):
        rest_mL = _rest(scene, memory, name)
        short = rest_mL > scene.tracks[name].level_at(scene.now_ns)
        return Want(liquid, flow, rest_mL, rest_mL, may_fill=play.dual and short)
    whole_mL, fraction_mL = point_mL(layout, point, name, scene.spec.reagent), collect_mL(layout, point, name)
    here_mL = max(whole_mL - _passed_of(scene, memory, name), fraction_mL)
    if play.dual:
        return _dual_want(scene, memory, point, Want(liquid, flow, here_mL), name, again)
    # Filled at rest, so that all that was seen of the settling is lost: then for a whole point.
    asked_mL = whole_mL if memory.step == "set" and name not in memory.topped else fraction_mL
    here_mL = whole_mL if again else here_mL
    return Want(liquid, flow, here_mL + scene.later_mL(name, here_mL, flow), asked_mL)


def _dual_want(scene: Scene, memory: Memory, point: Point, want: Want, name: str, again: bool) -> Want:
    """Which syringe gives the last exchange and the fraction, and what is filled for it. ``want`` needs this point."""
    play, level_mL = scene.layout.pumps[name], scene.tracks[name].level_at(scene.now_ns)
    if _late(scene, memory, point, name):
        another_mL = another_try_mL(scene.layout, point, name)
        lead = lead_mL(play, another_mL, want.flow_mL_min)
        falls_short = level_mL < _least_left_mL(scene, memory, point, name)  # the sooner it changes over, the better
        if falls_short or level_mL < (another_mL if again else _fraction_mL(scene, point, name) + lead):
            return replace(want, need_mL=another_mL + level_mL, level_mL=another_mL, swap=again or falls_short)
        return replace(want, need_mL=min(want.need_mL, level_mL))
    room_mL = play.pump.stroke_mL - play.reserve_mL(want.flow_mL_min)
    here_mL = want.need_mL
    if memory.step == "set" and memory.in_band_ns == NEVER_NS:
        return want  # waiting for the bath: nobody knows for how long, so no syringe is kept for the end
    if here_mL > room_mL and _least_left_mL(scene, memory, point, name) <= room_mL:
        here_mL = room_mL  # one syringe will do, with less patience
    if here_mL > room_mL:  # takes both syringes; neither is free for a flush meanwhile
        both_mL = here_mL + scene.later_mL(name, here_mL, want.flow_mL_min)
        return replace(want, need_mL=both_mL, level_mL=here_mL, swap=_better_first(scene, memory, point, name, here_mL))
    if level_mL >= 0.95 * here_mL:
        return replace(want, need_mL=min(here_mL, level_mL))
    if level_mL > _until_last_change_mL(scene, memory, point, name):  # it would run out late: kept for the next point
        return replace(want, need_mL=here_mL + level_mL, level_mL=here_mL, swap=True)
    return replace(want, need_mL=here_mL + scene.later_mL(name, here_mL - level_mL, want.flow_mL_min))


def _least_left_mL(scene: Scene, memory: Memory, point: Point, name: str) -> float:
    """What the rest of the point takes when all goes well; after any change-over an exchange and the fraction."""
    rest_mL = least_mL(scene.layout, point, name, scene.spec.reagent) - _passed_of(scene, memory, name)
    quiet_mL = point.flows_mL_min[name] * max(_quiet_left_s(scene), 0.0) / 60.0
    return max(rest_mL, quiet_mL + collect_mL(scene.layout, point, name))


def _better_first(scene: Scene, memory: Memory, point: Point, name: str, here_mL: float) -> bool:
    """True when the standby syringe should deliver first, so that the fuller one gives the end of the point."""
    track = scene.tracks[name]
    level_mL, standby_mL = track.level_at(scene.now_ns), track.standby_mL
    if level_mL + standby_mL < 0.95 * here_mL:
        return False
    return standby_mL <= _until_last_change_mL(scene, memory, point, name) < level_mL


def _rest(scene: Scene, memory: Memory, name: str) -> float:
    """What a pump still has to deliver for the fraction that is being diverted or collected."""
    point = scene.spec.point
    assert point is not None, "a point phase without a point"
    return max(0.0, collect_mL(scene.layout, point, name) - scene.since_mL(memory.at_divert).get(name, 0.0))


def topped(scene: Scene, memory: Memory, point: Point) -> frozenset[str]:
    """Pumps that need no more filling before they run: they hold what the point takes, or have just been filled."""
    found = set(memory.topped)
    for name, flow in point.flows_mL_min.items():
        play, track = scene.layout.pumps[name], scene.tracks[name]
        enough = track.level_at(scene.now_ns) >= point_mL(scene.layout, point, name, scene.spec.reagent)
        filled = track.swapped_mL >= memory.entered_mL.get(name, 0.0) - 1e-6 and track.fill is None
        if flow <= 0 or play.dual or enough or filled:
            found.add(name)
    return frozenset(found)


def liquid_for_fraction(scene: Scene, point: Point) -> bool:
    """True when each active syringe holds the whole fraction (or as much as one syringe can)."""
    for name, flow in point.flows_mL_min.items():
        play = scene.layout.pumps[name]
        guard_mL = play.guard_mL(flow)
        wanted_mL = min(collect_mL(scene.layout, point, name) + guard_mL, play.pump.stroke_mL * 0.9)
        if flow > 0 and scene.tracks[name].level_at(scene.now_ns) < wanted_mL:
            return False
    return True


def quiet_since_change(scene: Scene) -> bool:
    """True when no pump has changed over or been refilled within the last exchange of the trunk."""
    return _quiet_left_s(scene) <= 0.0


def _quiet_left_s(scene: Scene) -> float:
    """How much of an exchange of the trunk has still to pass since a pump last changed over or was refilled."""
    since = scene.since_mL({name: track.swapped_mL for name, track in scene.tracks.items()})
    point = scene.spec.point
    assert point is not None, "a point phase without a point"
    shares = {name: since[name] / flow for name, flow in point.flows_mL_min.items() if flow > 0}
    return scene.layout.path.residence_s(point.flows_mL_min) - 60.0 * min(shares.values(), default=0.0)
