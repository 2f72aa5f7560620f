"""One point: set the flows, let it settle, collect its own fraction and nothing else, back to waste.

Settled means: the trunk has been exchanged often enough since the streams were right and the jacket in its band, no
pump has changed over within the last exchange, and the signal is shown to be quiet. The outlet valve then waits until
the dead volume between the cell and the valve has passed at this point's own flow.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

from rigd.logic.conduct.conditioning import NEVER_NS, band_since_ns
from rigd.logic.conduct.means import Means, merged
from rigd.logic.conduct.point_events import abandoned, collected, interrupted, settled_event, started, unsettled_event
from rigd.logic.conduct.point_memory import Memory
from rigd.logic.conduct.point_needs import gate_s, gated, settle_rule
from rigd.logic.conduct.point_supply import liquid_for_fraction, point_wants, quiet_since_change, topped
from rigd.logic.conduct.switchover import label
from rigd.logic.conduct.wants import Move, PointResult, Prompt, Scene
from rigd.logic.estimators import turnovers
from rigd.logic.settling import Settler, is_steady, settle_step
from rigd.model.events import Event
from rigd.model.recipe import Point
from rigd.model.rig import TagKind

_FLOW_OFF = 0.02
_WARM_S_MAX = 3600.0


def start(scene: Scene) -> Memory:
    """At the beginning of the point."""
    return Memory(started_ns=scene.now_ns, entered_mL=scene.delivered_mL())


def step(scene: Scene, memory: Memory) -> Move[Memory]:
    """One step after the other; each says when it is over."""
    point = scene.spec.point
    assert point is not None, "a point phase without a point"
    band_K = scene.layout.band_K
    memory = replace(memory, in_band_ns=band_since_ns(scene, point.temperature_degC, band_K, memory.in_band_ns))
    return _STEPS[memory.step](scene, memory, point)


def result(scene: Scene, memory: Memory, point: Point, status: str) -> PointResult:
    """What is known of the point now."""
    signal = scene.layout.recipe.settle.signal
    measured = scene.spec.reagent and _is_conversion(scene, signal)  # of solvent alone there is nothing to convert
    end_ns = memory.end_ns or (scene.now_ns if memory.collect_ns else 0)
    taken_mL = sum(scene.since_mL(memory.at_collect).values()) if memory.collect_ns and not memory.end_ns else 0.0
    return PointResult(
        id=point.id,
        kind=point.kind,
        flows_mL_min=dict(point.flows_mL_min),
        temperature_degC=memory.means.mean(scene.layout.bed),
        residence_time_s=memory.residence_s,
        settled=memory.settled,
        settle_s=(memory.settled_ns - memory.settle_ns) / 1e9 if memory.settled_ns else 0.0,
        conversion=memory.means.mean(signal) if measured else math.nan,
        values=memory.means.values(),
        collected_mL=memory.collected_mL or taken_mL,
        collect_start_ns=memory.collect_ns,
        collect_end_ns=end_ns,
        status=status,
    )


def _is_conversion(scene: Scene, signal: str) -> bool:
    """True for the conversion of a cell's spectra, and for an analyser that measures a fraction by itself."""
    tag = scene.layout.program.tags.get(signal)
    own = tag is not None and tag.kind is TagKind.MEASURED and tag.measures == "fraction"
    return own or signal.endswith(".conversion")


def broken_off(scene: Scene, memory: Memory) -> tuple[PointResult | None, tuple[Event, ...]]:
    """What a hold or stop leaves of a point: its part of a fraction is in the flask and is accounted for."""
    point = scene.spec.point
    assert point is not None, "a point phase without a point"
    if not memory.collect_ns:
        return None, ()
    found = result(scene, memory, point, "interrupted")
    return found, (interrupted(found, scene.now_ns),)


def _set(scene: Scene, memory: Memory, point: Point) -> Move[Memory]:
    """Flows right, fronts past their merges, jacket in its band: from here volumes count."""
    waste = scene.layout.recipe.collect.waste_position
    first = memory.started_ns == scene.now_ns
    memory = replace(memory, topped=topped(scene, memory, point))
    events = (started(point, scene.now_ns),) if first else ()
    wants = point_wants(scene, memory, point, waste)
    warm = memory.in_band_ns != NEVER_NS
    if not first and warm and _streams_right(scene, point):
        marks = scene.delivered_mL()
        memory = replace(
            memory, step="settle", marks=marks, first=memory.first or marks, settle_ns=memory.settle_ns or scene.now_ns
        )
    longest_s = scene.layout.recipe.conditioning.max_s if scene.layout.recipe.conditioning else _WARM_S_MAX
    late = not warm and (scene.now_ns - memory.started_ns) / 1e9 > longest_s
    text = f"The jacket does not reach {point.temperature_degC:g} degC. Check the chiller, then resume or stop."
    return Move(
        memory,
        wants,
        "setting flows" if warm else f"waiting for {point.temperature_degC:g} degC",
        events,
        trouble=f"point {point.id} was not at temperature within {longest_s / 60:g} min" if late else "",
        prompt=Prompt("point-late", text) if late else None,
        left_s=_left_s(scene, memory, point, 0.0),
    )


def _streams_right(scene: Scene, point: Point) -> bool:
    """True when every pump delivers what the point says, of the liquid that it says, up to its merge."""
    for name, flow in point.flows_mL_min.items():
        play, track = scene.layout.pumps[name], scene.tracks[name]
        if abs(track.flow_mL_min - flow) > _FLOW_OFF * flow + 0.001:
            return False
        if flow > 0 and track.active != label(play, scene.spec.reagent):
            return False
        if flow > 0 and track.front.to_merge_mL(play.feed, track.delivered_at(scene.now_ns)) > 0:
            return False
    return True


def _settle(scene: Scene, memory: Memory, point: Point) -> Move[Memory]:
    waste = scene.layout.recipe.collect.waste_position
    if not _streams_right(scene, point) or memory.in_band_ns == NEVER_NS:
        memory = _anew(scene, memory)
        return Move(memory, point_wants(scene, memory, point, waste), "settling starts anew")
    rule, path = scene.layout.recipe.settle, scene.layout.path
    passed = turnovers(path, scene.since_mL(memory.marks or {}))
    memory = _judged(scene, memory, point, passed)
    gate_volumes = _gate_volumes(scene, memory, point, passed)
    steady = _is_steady(scene, memory, point, passed, gate_volumes)
    ready = liquid_for_fraction(scene, point) and quiet_since_change(scene)
    events: tuple[Event, ...] = ()
    if passed >= rule.volumes and ready:
        if steady:
            memory = _settled(scene, memory, True)
            events = (settled_event(point, memory.settler.trend.mean, passed, memory.settle_ns, scene.now_ns),)
        elif turnovers(path, scene.since_mL(memory.first or {})) >= rule.volumes_max:
            events = (unsettled_event(point, memory.settler.verdict, passed, scene.now_ns),)
            if rule.on_timeout != "collect":
                return _given_up(scene, memory, point, events)
            memory = _settled(scene, memory, False)
    wants = point_wants(scene, memory, point, waste)
    ahead = [volumes - passed for volumes in (rule.volumes, gate_volumes) if volumes > passed]
    due_ns = scene.now_ns + _ns(scene, point, min(ahead)) if ahead else None
    text = f"settling: {passed:.1f} of {rule.volumes:g} volumes, signal {memory.settler.verdict}"
    left_s = _left_s(scene, memory, point, passed)
    return Move(memory, wants, text, events, due_ns=due_ns, left_s=left_s, calm=memory.step == "settle")


def _is_steady(scene: Scene, memory: Memory, point: Point, passed: float, gate_volumes: float) -> bool:
    """True when the signal is shown to be quiet; in a plan, when it is likely to be."""
    if not gated(scene.layout, scene.spec.reagent):
        return True
    if scene.layout.foreseen:
        return passed >= gate_volumes
    return is_steady(memory.settler, settle_rule(scene.layout, point))


def _gate_volumes(scene: Scene, memory: Memory, point: Point, passed: float) -> float:
    """In a plan, the volumes after which the signal gate opens; 0 in a run, where the signal says it."""
    if not scene.layout.foreseen or not gated(scene.layout, scene.spec.reagent):
        return 0.0
    return _gate_s(scene, memory, point, passed) / scene.layout.path.residence_s(point.flows_mL_min)


def _gate_s(scene: Scene, memory: Memory, point: Point, passed: float) -> float:
    """When the signal gate is likely to open, counted like the volumes that have passed."""
    here_s = (scene.now_ns - memory.started_ns) / 1e9
    waited_s = here_s - passed * scene.layout.path.residence_s(point.flows_mL_min)
    return gate_s(scene.layout, point, waited_s)


def _anew(scene: Scene, memory: Memory) -> Memory:
    """Back to setting the flows: what has been seen of the settling does not count any more."""
    return replace(
        memory,
        step="set",
        entered_mL=scene.delivered_mL(),
        topped=frozenset(),
        marks=None,
        settler=Settler(),
        judged=False,
        means=Means(),
        window=(),
    )


def _ns(scene: Scene, point: Point, volumes: float) -> int:
    return int(volumes * scene.layout.path.residence_s(point.flows_mL_min) * 1e9) + 1_000_000


def _judged(scene: Scene, memory: Memory, point: Point, passed: float) -> Memory:
    """Feed the signal gate, from the moment on when the old liquid has left the trunk once."""
    signal = scene.layout.recipe.settle.signal
    if not memory.judged and passed >= min(1.0, scene.layout.recipe.settle.volumes):
        memory = replace(memory, settler=Settler(), judged=True, means=Means(), window=())
    memory = replace(memory, means=memory.means.add(scene.view, scene.layout.record))
    value = scene.view.value(signal) if signal in scene.view.fresh else None
    if value is None or not gated(scene.layout, scene.spec.reagent):
        return memory
    t_ns = scene.view.samples[signal].t_ns
    settler = settle_step(memory.settler, settle_rule(scene.layout, point), t_ns, value)
    memory = replace(memory, settler=settler)
    if settler.pending:
        return memory
    kept = (*memory.window, memory.means)[-scene.layout.recipe.settle.window :]
    return replace(memory, means=Means(), window=kept)


def _settled(scene: Scene, memory: Memory, settled: bool) -> Memory:
    return replace(
        memory,
        step="divert",
        settled=settled,
        settled_ns=scene.now_ns,
        at_divert=scene.delivered_mL(),
        residence_s=scene.residence_s(),
        means=merged((*memory.window, memory.means)),
    )


def _given_up(scene: Scene, memory: Memory, point: Point, events: tuple[Event, ...]) -> Move[Memory]:
    waste = scene.layout.recipe.collect.waste_position
    found = result(scene, memory, point, "abandoned")
    wants = point_wants(scene, memory, point, waste)
    return Move(memory, wants, "abandoned", (*events, abandoned(found, scene.now_ns)), done=True, result=found)


def _passed_mL(scene: Scene, marks: Mapping[str, float]) -> float:
    """Volume past the outlet valve since ``marks``."""
    return sum(scene.since_mL(marks).values())


def _divert(scene: Scene, memory: Memory, point: Point) -> Move[Memory]:
    """Wait until the liquid that was seen settled has reached the outlet valve; then turn it."""
    recipe = scene.layout.recipe
    memory = replace(memory, means=memory.means.add(scene.view, scene.layout.record))
    left_mL = scene.layout.dead_mL - _passed_mL(scene, memory.at_divert)
    outlet = recipe.collect.position if left_mL <= 0 else recipe.collect.waste_position
    if left_mL <= 0:
        memory = replace(memory, turned_ns=memory.turned_ns or scene.now_ns)
        if scene.outlet_at(recipe.collect.position):
            memory = _begun(scene, memory, point)
    due_ns = scene.now_ns + int(60e9 * left_mL / point.total_mL_min) + 1_000_000 if left_mL > 0 else None
    left_s = 60.0 * (max(left_mL, 0.0) + recipe.collect.volume_mL) / point.total_mL_min
    text = "letting the dead volume pass"
    return Move(memory, point_wants(scene, memory, point, outlet), text, due_ns=due_ns, left_s=left_s)


def _begun(scene: Scene, memory: Memory, point: Point) -> Memory:
    """The outlet is confirmed at the flask. It got there when its travel was over, before that could be read."""
    valve = scene.layout.program.valves.get(scene.layout.path.outlet_valve)
    travel_ns = int(valve.travel_s * 1e9) if valve else 0
    begun_ns = min(memory.turned_ns + travel_ns, scene.now_ns)
    late_min = (scene.now_ns - begun_ns) / 60e9
    marks = {name: mL - point.flows_mL_min.get(name, 0.0) * late_min for name, mL in scene.delivered_mL().items()}
    return replace(memory, step="collect", collect_ns=begun_ns, at_collect=marks)


def _collect(scene: Scene, memory: Memory, point: Point) -> Move[Memory]:
    recipe = scene.layout.recipe
    memory = replace(memory, means=memory.means.add(scene.view, scene.layout.record))
    left_mL = recipe.collect.volume_mL - _passed_mL(scene, memory.at_collect)
    outlet = recipe.collect.position
    if left_mL <= 0:
        taken_mL = _passed_mL(scene, memory.at_collect)
        memory = replace(memory, step="back", end_ns=scene.now_ns, collected_mL=taken_mL)
        outlet = recipe.collect.waste_position
    left_s = 60.0 * max(left_mL, 0.0) / point.total_mL_min
    due_ns = scene.now_ns + int(1e9 * left_s) + 1_000_000 if left_mL > 0 else None
    text = f"collecting, {max(left_mL, 0.0):.2f} mL to go"
    calm = memory.step == "collect"
    return Move(memory, point_wants(scene, memory, point, outlet), text, due_ns=due_ns, left_s=left_s, calm=calm)


def _back(scene: Scene, memory: Memory, point: Point) -> Move[Memory]:
    """Nothing else changes before the outlet is confirmed at waste."""
    waste = scene.layout.recipe.collect.waste_position
    wants = point_wants(scene, memory, point, waste)
    if not scene.outlet_at(waste):
        return Move(memory, wants, "turning the outlet to waste")
    found = result(scene, memory, point, "collected" if memory.settled else "unsettled")
    return Move(memory, wants, "collected", (collected(found, scene.now_ns),), done=True, result=found)


def _left_s(scene: Scene, memory: Memory, point: Point, passed: float) -> float:
    """Volumes, or the signal if that takes longer; then dead volume and fraction."""
    layout = scene.layout
    residence_s = layout.path.residence_s(point.flows_mL_min)
    by_volume_s = max(0.0, layout.recipe.settle.volumes - passed) * residence_s
    by_signal_s = 0.0
    if gated(scene.layout, scene.spec.reagent):
        by_signal_s = max(0.0, _gate_s(scene, memory, point, passed) - passed * residence_s)
    after_s = 60.0 * (layout.dead_mL + layout.recipe.collect.volume_mL) / point.total_mL_min
    return max(by_volume_s, by_signal_s) + after_s


_STEPS = {"set": _set, "settle": _settle, "divert": _divert, "collect": _collect, "back": _back}
