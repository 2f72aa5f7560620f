"""Park: pumps at rest, valves at rest, no pressure, bath as the recipe leaves it."""

from __future__ import annotations

from dataclasses import dataclass

from rigd.logic.conduct.wants import Move, Prompt, Scene, Want, Wants


@dataclass(frozen=True, slots=True)
class Memory:
    """When the phase began."""

    started_ns: int


def start(scene: Scene) -> Memory:
    """At the beginning of the phase."""
    return Memory(scene.now_ns)


def parked(scene: Scene) -> Wants:
    """What a parked rig looks like."""
    rule = scene.layout.recipe.park
    pumps = {name: Want(play.solvent, may_fill=False) for name, play in scene.layout.pumps.items()}
    return Wants(pumps, scene.layout.recipe.collect.waste_position, rule.temperature_degC, rule.circulate)


def step(scene: Scene, memory: Memory) -> Move[Memory]:
    """Done when nothing moves and every pressure counts as none."""
    rule = scene.layout.recipe.park
    bars = [scene.view.value(tag) for tag in scene.layout.pressures]
    relaxed = all(bar is not None and bar <= rule.pressure_bar_max for bar in bars)
    still = all(track.at_rest for track in scene.tracks.values())
    done = still and relaxed and scene.outlet_at(scene.layout.recipe.collect.waste_position)
    late = not done and (scene.now_ns - memory.started_ns) / 1e9 >= rule.max_s
    highest = max((bar for bar in bars if bar is not None), default=float("nan"))
    why = f"the path is still at {highest:.2f} bar after {rule.max_s / 60:g} min at rest"
    return Move(
        memory,
        parked(scene),
        "waiting for the pressure to go" if still else "stopping the pumps",
        done=done,
        trouble=f"parking is not finished: {why}" if late else "",
        prompt=Prompt("park-late", f"Not parked: {why}. Open the path to waste by hand, then resume.")
        if late
        else None,
        due_ns=memory.started_ns + int(rule.max_s * 1e9),
    )
