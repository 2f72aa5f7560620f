"""Leak test: outlet shut, pressure up, pumps stopped, wait, judge the decay, open before anything else.

While the pressure rises at a known flow into a closed path, the compliance C = Q / (dP/dt) is measured: the number that
says how fast a blocked line becomes dangerous, and a check for trapped gas.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from rigd.logic.conduct.layout import Layout
from rigd.logic.conduct.shares import solvent_flows
from rigd.logic.conduct.wants import Move, Prompt, Scene, Want, Wants, event
from rigd.logic.settling import trend
from rigd.model.events import Event, EventKind
from rigd.model.recipe import LeakTest

PLUG = "leak-test-plug"
UNPLUG = "leak-test-unplug"
_AVERAGED = 5
_RELAX_S = 60.0
"""From the open outlet to no pressure: seconds in a healthy path, far more where liquid is trapped behind a block."""
_KEPT = 400


@dataclass(frozen=True, slots=True)
class Memory:
    """``stage`` since ``stage_ns``; pressures seen in it as (seconds, bar) per tag; result once judged."""

    stage: str = "charge"
    stage_ns: int = 0
    seen: Mapping[str, tuple[tuple[float, float], ...]] = field(default_factory=dict)
    filled_mL_min: float = 0.0
    before_bar: Mapping[str, float] = field(default_factory=dict)
    compliance_mL_bar: float = 0.0
    failure: str = ""


def start(scene: Scene) -> Memory:
    """At the beginning of the phase."""
    return Memory(stage_ns=scene.now_ns)


def fill_flows(layout: Layout, rule: LeakTest) -> dict[str, float]:
    """The filling flow, shared by all pumps so that every line is under test."""
    return solvent_flows(layout, rule.fill_mL_min)


def step(scene: Scene, memory: Memory) -> Move[Memory]:
    """One stage after the other; each says when it is over."""
    rule = scene.layout.recipe.leak_test
    assert rule is not None, "a leak test phase without a leak test table"
    memory = _collect(scene, memory)
    return _STAGES[memory.stage](scene, memory, rule)


def _collect(scene: Scene, memory: Memory) -> Memory:
    """Keep the pressures seen in this stage."""
    fresh = [tag for tag in scene.layout.pressures if tag in scene.view.fresh]
    seen = dict(memory.seen)
    for tag in fresh:
        value = scene.view.value(tag)
        if value is not None:
            at_s = (scene.view.samples[tag].t_ns - memory.stage_ns) / 1e9
            seen[tag] = (*seen.get(tag, ()), (at_s, value))[-_KEPT:]
    return replace(memory, seen=seen) if fresh else memory


def _next(memory: Memory, stage: str, now_ns: int) -> Memory:
    return replace(memory, stage=stage, stage_ns=now_ns, seen={})


def _spent_s(scene: Scene, memory: Memory) -> float:
    return (scene.now_ns - memory.stage_ns) / 1e9


def _charge(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Enough solvent in the syringes for the whole rise, then all pumps at rest."""
    flows = fill_flows(scene.layout, rule)
    wants, ready = {}, True
    for name, flow in flows.items():
        play, track = scene.layout.pumps[name], scene.tracks[name]
        need_mL = flow * rule.fill_s_max / 60.0
        wants[name] = Want(play.solvent, 0.0, need_mL, level_mL=need_mL)
        enough = track.supply_mL(play.solvent, scene.now_ns) >= need_mL and track.fill is None
        ready = ready and enough and track.at_rest
    if ready:
        memory = _next(memory, "shut", scene.now_ns)
    return Move(memory, Wants(wants, _open(scene)), step="charging the syringes", left_s=_left_s(memory, rule))


def _shut(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Close the outlet: by its valve, or by a person."""
    prompt = None
    if rule.shut_position:
        closed = scene.outlet_at(rule.shut_position)
    else:
        closed = scene.confirmed(PLUG)
        prompt = None if closed else Prompt(PLUG, "Plug the outlet of the path, then confirm.")
    wants = Wants(_still(scene), rule.shut_position or _open(scene))
    if closed:
        memory = replace(
            _next(memory, "rise", scene.now_ns), filled_mL_min=sum(fill_flows(scene.layout, rule).values())
        )
    return Move(memory, wants, step="shutting the outlet", prompt=prompt, left_s=_left_s(memory, rule))


def _rise(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Deliver until the pressure is there."""
    flows = fill_flows(scene.layout, rule)
    wants = {
        name: Want(scene.layout.pumps[name].solvent, flow, need_mL=0.0, may_fill=False) for name, flow in flows.items()
    }
    events: tuple[Event, ...] = ()
    reached = any(row[-1][1] >= rule.pressure_bar for row in memory.seen.values() if row)
    if reached:
        memory, events = _compliance(scene, memory, rule)
        memory = _next(memory, "settle", scene.now_ns)
        wants = _still(scene)
    elif _spent_s(scene, memory) >= rule.fill_s_max:
        highest = max((row[-1][1] for row in memory.seen.values() if row), default=0.0)
        failure = f"{highest:.2f} bar after {rule.fill_s_max:g} s instead of {rule.pressure_bar:g} bar"
        memory = _next(replace(memory, failure=failure), "open", scene.now_ns)
        wants = _still(scene)
    due_ns = memory.stage_ns + int(rule.fill_s_max * 1e9)
    outlet = rule.shut_position or _open(scene)
    return Move(
        memory, Wants(wants, outlet), "raising the pressure", events, due_ns=due_ns, left_s=_left_s(memory, rule)
    )


def _compliance(scene: Scene, memory: Memory, rule: LeakTest) -> tuple[Memory, tuple[Event, ...]]:
    """From the straight part of the rise, between a quarter and all of the pressure."""
    rows = (tuple(pair for pair in row if 0.25 * rule.pressure_bar <= pair[1]) for row in memory.seen.values())
    slopes = [trend(row).slope for row in rows if len(row) >= 3]
    rising = [slope for slope in slopes if slope > 0]
    if not rising:
        return memory, ()
    slope_bar_s = sum(rising) / len(rising)
    found = memory.filled_mL_min / 60.0 / slope_bar_s
    how = f"{memory.filled_mL_min:g} mL/min raised it by {slope_bar_s:.3g} bar/s"
    text = f"The closed path takes {found * 1000:.1f} uL per bar ({how})."
    done = event(EventKind.MEASUREMENT, "compliance", scene.now_ns, text, value=round(found, 6), unit="mL/bar")
    return replace(memory, compliance_mL_bar=found), (done,)


def _settle(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Pumps at rest; let the path relax, and remember the pressure at the end."""
    step_ = "letting the pressure settle"
    due_ns = memory.stage_ns + int(rule.settle_s * 1e9)
    if scene.now_ns >= due_ns and all(track.at_rest for track in scene.tracks.values()):
        memory = _next(replace(memory, before_bar=_averages(memory)), "hold", scene.now_ns)
    wants = Wants(_still(scene), rule.shut_position or _open(scene))
    return Move(memory, wants, step_, due_ns=due_ns, left_s=_left_s(memory, rule))


def _hold(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Wait, then judge the worst sensor."""
    due_ns = memory.stage_ns + int(rule.hold_s * 1e9)
    events: tuple[Event, ...] = ()
    if scene.now_ns >= due_ns:
        memory, events = _judge(scene, memory, rule)
        memory = _next(memory, "open", scene.now_ns)
    wants = Wants(_still(scene), rule.shut_position or _open(scene))
    return Move(memory, wants, "holding the pressure", events, due_ns=due_ns, left_s=_left_s(memory, rule))


def _judge(scene: Scene, memory: Memory, rule: LeakTest) -> tuple[Memory, tuple[Event, ...]]:
    after = _averages(memory)
    drops = {tag: memory.before_bar[tag] - bar for tag, bar in after.items() if tag in memory.before_bar}
    if not drops:
        return replace(memory, failure="no pressure could be read"), ()
    worst = max(drops.values())
    leak_uL_min = memory.compliance_mL_bar * 1000.0 * worst / rule.hold_s * 60.0
    text = f"The pressure fell by {worst:.3f} bar in {rule.hold_s:g} s ({leak_uL_min:.2g} uL/min)."
    measured = (
        event(EventKind.MEASUREMENT, "leak test drop", scene.now_ns, text, value=round(worst, 5), unit="bar"),
        event(EventKind.MEASUREMENT, "leak rate", scene.now_ns, text, value=round(leak_uL_min, 4), unit="uL/min"),
    )
    if worst > rule.drop_bar_max:
        failure = f"the pressure fell by {worst:.2f} bar in {rule.hold_s:g} s, allowed is {rule.drop_bar_max:g} bar"
        return replace(memory, failure=failure), measured
    return memory, measured


def _averages(memory: Memory) -> dict[str, float]:
    """Mean of the last few samples of each sensor."""
    last = {tag: row[-_AVERAGED:] for tag, row in memory.seen.items() if row}
    return {tag: sum(bar for _, bar in row) / len(row) for tag, row in last.items()}


def _reopen(scene: Scene, memory: Memory, rule: LeakTest) -> Move[Memory]:
    """Open before anything else; pass or fail is acted on only when the path is open and the pressure is gone."""
    prompt = None
    opened = scene.outlet_at(_open(scene))
    if not rule.shut_position:
        opened = scene.confirmed(UNPLUG)
        prompt = (
            None
            if opened
            else Prompt(UNPLUG, "Take the plug off the outlet (the path is under pressure), then confirm.")
        )
    relaxed = all((scene.view.value(tag) or 0.0) <= _relaxed_bar(rule) for tag in scene.layout.pressures)
    trouble = ""
    due_ns = memory.stage_ns + int(_RELAX_S * 1e9)
    if opened and not relaxed and not memory.failure and scene.now_ns >= due_ns:
        highest = max((scene.view.value(tag) or 0.0) for tag in scene.layout.pressures)
        words = f"the outlet is open and {highest:.2f} bar stand in the path all the same"
        trouble = f"leak test cannot end: {words}"
        prompt = Prompt("pressure-trapped", f"Leak test: {words}. Find what is blocked, then resume or stop.")
    if opened and memory.failure:
        trouble = f"leak test failed: {memory.failure}"
        prompt = Prompt("leak-test-failed", f"Leak test failed: {memory.failure}. Find the leak, then resume or stop.")
    done = opened and relaxed and not memory.failure
    wants = Wants(_still(scene), _open(scene))
    return Move(
        memory, wants, "opening the outlet", done=done, trouble=trouble, prompt=prompt, due_ns=due_ns,
        left_s=_left_s(memory, rule),
    )  # fmt: skip


def _relaxed_bar(rule: LeakTest) -> float:
    """Pressure at which the next phase may start: well below that of the test (a regulator keeps some)."""
    return 0.8 * rule.pressure_bar


def _still(scene: Scene) -> dict[str, Want]:
    return {name: Want(scene.layout.pumps[name].solvent, may_fill=False) for name in scene.layout.solvent_pumps()}


def _open(scene: Scene) -> str:
    return scene.layout.recipe.collect.waste_position


def _left_s(memory: Memory, rule: LeakTest) -> float:
    """What is still to come, the rise counted as a third of its longest time."""
    rise_s = rule.fill_s_max / 3
    after = {"charge": rise_s, "shut": rise_s, "rise": rise_s, "settle": 0.0, "hold": -rule.settle_s}
    rest_s = rule.settle_s + rule.hold_s
    return 0.0 if memory.stage == "open" else after[memory.stage] + rest_s


_STAGES = {
    "charge": _charge,
    "shut": _shut,
    "rise": _rise,
    "settle": _settle,
    "hold": _hold,
    "open": _reopen,
}
