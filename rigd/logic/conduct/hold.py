"""Hold and restart, as the chemistry sheet allows.

Reagent may stand in the bed only when the sheet says so. Then, or when there is only solvent in the bed, the pumps
stop. Otherwise solvent flushes the bed first, from the standby syringe if it is free, and a trickle goes on for as long
as the solvent at hand lasts. A restart never goes straight on: solvent through the trunk, jacket in its band, a new
switchover at half the flow, then the interrupted phase from its beginning.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigd.logic.conduct.conditioning import NEVER_NS, band_since_ns, lead
from rigd.logic.conduct.shares import in_range, solvent_flows
from rigd.logic.conduct.wants import Move, Scene, Want, Wants
from rigd.logic.estimators import turnovers

TRICKLE = 0.05
"""Part of the flush flow that trickles on while held."""

_GIVE_UP_S = 900.0


@dataclass(frozen=True, slots=True)
class Holding:
    """When the hold began."""

    started_ns: int


def start_hold(scene: Scene) -> Holding:
    """At the beginning of a hold."""
    return Holding(scene.now_ns)


def may_stand(scene: Scene) -> bool:
    """True when the liquid that is in the bed may stand still in it."""
    sheet = scene.layout.recipe.sheet
    return scene.clean or (sheet is not None and sheet.stagnation_safe)


def holding(scene: Scene, memory: Holding) -> Move[Holding]:
    """Get to the held state: valves first, then rest or flush."""
    stand = may_stand(scene)
    wants = _still(scene) if stand else _flushing(scene)
    valves = scene.outlet_at(scene.layout.recipe.collect.waste_position)
    at_rest = all(track.at_rest and track.fill is None for track in scene.tracks.values())
    late = (scene.now_ns - memory.started_ns) / 1e9 > _GIVE_UP_S
    done = valves and ((stand and at_rest) or (stand and scene.clean) or late)
    step = "stopping" if stand else "flushing the bed with solvent"
    return Move(memory, wants, step, done=done)


def held(scene: Scene, memory: Holding) -> Move[Holding]:
    """Wait: at rest, or with a trickle when the chemistry must not stand."""
    sheet = scene.layout.recipe.sheet
    trickle = sheet is not None and not sheet.stagnation_safe
    return Move(memory, _trickling(scene) if trickle else _still(scene), "waiting for a person")


def _outlet(scene: Scene, pumps: Mapping[str, Want]) -> Wants:
    return Wants(pumps, scene.layout.recipe.collect.waste_position)


def _still(scene: Scene) -> Wants:
    """All pumps at rest, feed valves at solvent, nothing drawn."""
    return _outlet(scene, {n: Want(p.solvent or p.reagent, may_fill=False) for n, p in scene.layout.pumps.items()})


def _flushing(scene: Scene) -> Wants:
    """Solvent at once where the standby syringe is free for it."""
    flows = solvent_flows(scene.layout, scene.layout.rig.flush_mL_min)
    wants = dict(_still(scene).pumps)
    for name, flow in flows.items():
        play = scene.layout.pumps[name]
        part = flow / sum(flows.values())
        need_mL = scene.soiled_mL * part + 0.05
        wants[name] = Want(play.solvent, flow, need_mL, level_mL=min(need_mL, lead(play, flow, need_mL)), urgent=True)
    return _outlet(scene, wants)


def _trickling(scene: Scene) -> Wants:
    wants = dict(_still(scene).pumps)
    for name, flow in solvent_flows(scene.layout, scene.layout.rig.flush_mL_min).items():
        play, track = scene.layout.pumps[name], scene.tracks[name]
        if track.active == play.solvent:
            wants[name] = Want(play.solvent, in_range(play, flow * TRICKLE), may_fill=False)
    return _outlet(scene, wants)


@dataclass(frozen=True, slots=True)
class Restarting:
    """Counters when the solvent began to flow in all pumps (``None``: not yet), and since when the jacket is right.

    ``enough``: only solvent is in the bed.
    """

    marks: Mapping[str, float] | None = None
    in_band_ns: int = NEVER_NS
    enough: bool = False


def start_restart(scene: Scene) -> Restarting:
    """At the beginning of a restart; a bed that was flushed during the hold needs no second flush."""
    return Restarting(enough=scene.clean)


def restart(scene: Scene, memory: Restarting) -> Move[Restarting]:
    """Solvent once through the trunk and the outlet lines; then wait at rest until the jacket is in its band."""
    wanted_degC = _temperature(scene)
    flows = solvent_flows(scene.layout, _total(scene))
    memory = _flushed(scene, replace(memory, in_band_ns=_band(scene, memory, wanted_degC)), flows)
    wants = _still(scene) if memory.enough else _restart_wants(scene, flows)
    step = f"waiting for {wanted_degC or 0.0:g} degC" if memory.enough else "flushing with solvent"
    done = memory.enough and memory.in_band_ns != NEVER_NS
    return Move(memory, replace(wants, temperature_degC=wanted_degC), step, done=done)


def _flushed(scene: Scene, memory: Restarting, flows: Mapping[str, float]) -> Restarting:
    """Whether the solvent has gone through."""
    if memory.enough:
        return memory
    if memory.marks is None:
        flowing = all(scene.tracks[name].active == scene.layout.pumps[name].solvent for name in flows)
        return replace(memory, marks=scene.delivered_mL()) if flowing else memory
    passed = turnovers(scene.layout.path, scene.since_mL(memory.marks))
    return replace(memory, enough=passed >= _restart_volumes(scene, flows))


def _restart_volumes(scene: Scene, flows: Mapping[str, float]) -> float:
    """One exchange of the trunk after the outlet lines have been pushed through."""
    longest_min = max((scene.layout.pumps[name].feed.outlet_mL / flow for name, flow in flows.items()), default=0.0)
    return 1.0 + longest_min * sum(flows.values()) / max(scene.layout.trunk_mL, 1e-9)


def _restart_wants(scene: Scene, flows: Mapping[str, float]) -> Wants:
    """Solvent at once, so that the reagent in the other syringe is kept for the switchover."""
    volume_mL = _restart_volumes(scene, flows) * scene.layout.trunk_mL
    wants = dict(_still(scene).pumps)
    for name, flow in flows.items():
        need_mL = volume_mL * flow / sum(flows.values()) + 0.1
        wants[name] = Want(scene.layout.pumps[name].solvent, flow, need_mL, urgent=True)
    return _outlet(scene, wants)


def _temperature(scene: Scene) -> float | None:
    recipe = scene.layout.recipe
    if scene.spec.point:
        return scene.spec.point.temperature_degC
    return recipe.conditioning.temperature_degC if recipe.conditioning else None


def _band(scene: Scene, memory: Restarting, wanted_degC: float | None) -> int:
    if wanted_degC is None:
        return scene.now_ns
    return band_since_ns(scene, wanted_degC, scene.layout.band_K, memory.in_band_ns)


def _total(scene: Scene) -> float:
    recipe = scene.layout.recipe
    return recipe.conditioning.total_mL_min if recipe.conditioning else scene.layout.rig.flush_mL_min
