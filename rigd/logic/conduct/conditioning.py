"""Conditioning: solvent at working rate until the bed is swollen and the jacket has been in its band long enough."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigd.logic.conduct.layout import PumpLayout
from rigd.logic.conduct.shares import solvent_flows
from rigd.logic.conduct.wants import Move, Prompt, Scene, Want, Wants
from rigd.logic.estimators import turnovers
from rigd.model.recipe import Conditioning

NEVER_NS = -1


@dataclass(frozen=True, slots=True)
class Memory:
    """Counters at the start, when that was, and since when the jacket is in its band (-1: it is not)."""

    marks: Mapping[str, float]
    started_ns: int
    in_band_ns: int = NEVER_NS


def start(scene: Scene) -> Memory:
    """At the beginning of the phase."""
    return Memory(scene.delivered_mL(), scene.now_ns)


def step(scene: Scene, memory: Memory) -> Move[Memory]:
    """Done when volumes, time and temperature are all met; after the longest time, a hold."""
    rule = scene.layout.recipe.conditioning
    assert rule is not None, "a conditioning phase without a conditioning table"
    memory = replace(memory, in_band_ns=band_since_ns(scene, rule.temperature_degC, rule.band_K, memory.in_band_ns))
    passed = turnovers(scene.layout.path, scene.since_mL(memory.marks))
    spent_s = (scene.now_ns - memory.started_ns) / 1e9
    flows = solvent_flows(scene.layout, rule.total_mL_min)
    left_s = _left_s(scene, memory, rule, passed, spent_s, flows)
    done = left_s <= 0.0
    late = not done and spent_s >= rule.max_s
    return Move(
        memory,
        Wants(working(scene, flows, left_s), scene.layout.recipe.collect.waste_position, rule.temperature_degC),
        step=_step(memory, passed, rule),
        done=done,
        trouble=f"conditioning was not finished within {rule.max_s / 60:g} min" if late else "",
        prompt=_too_late(scene, rule) if late else None,
        due_ns=scene.now_ns + int(1e9 * max(left_s, 0.0)) + 1_000_000,
        left_s=left_s,
    )


def band_since_ns(scene: Scene, wanted_degC: float, band_K: float, since_ns: int) -> int:
    """Since when the jacket has been in its band without a break; -1 when it is not."""
    off_K = scene.jacket_off_K(wanted_degC)
    if off_K is None or off_K > band_K:
        return NEVER_NS
    return scene.now_ns if since_ns == NEVER_NS else since_ns


def working(scene: Scene, flows: Mapping[str, float], left_s: float) -> dict[str, Want]:
    """Solvent for as long as it takes, in small fillings, so that little is left to run out afterwards."""
    return {name: _working(scene.layout.pumps[name], flow, left_s) for name, flow in flows.items()}


def _working(play: PumpLayout, flow: float, left_s: float) -> Want:
    batch_mL = min(batch(play, flow), play.pump.stroke_mL)
    lead_mL = lead(play, flow, batch_mL) if play.dual else 0.0
    need_mL = max(flow * left_s / 60.0, lead_mL)
    return Want(play.solvent, flow, need_mL, level_mL=lead_mL, batch_mL=batch_mL)


def batch(play: PumpLayout, flow_mL_min: float) -> float:
    """Size of a filling while nobody knows for how long: a minute and a half of flow; all of a single syringe."""
    return max(1.5 * flow_mL_min, 0.5) if play.dual else play.pump.stroke_mL


def lead(play: PumpLayout, flow_mL_min: float, volume_mL: float) -> float:
    """What flows out while a filling of this volume is prepared and drawn."""
    return flow_mL_min * (play.refill_s(volume_mL) + 3.0 + play.period_s) / 60.0 * 1.5


def _left_s(
    scene: Scene, memory: Memory, rule: Conditioning, passed: float, spent_s: float, flows: Mapping[str, float]
) -> float:
    """Longest of what is still missing: volumes, least time, time in the band (unknown while outside: the whole)."""
    by_volume_s = (rule.volumes - passed) * scene.layout.path.residence_s(flows) if passed < rule.volumes else 0.0
    inside_s = (scene.now_ns - memory.in_band_ns) / 1e9 if memory.in_band_ns != NEVER_NS else 0.0
    by_band_s = rule.steady_s - inside_s if scene.layout.jacket else 0.0
    return max(by_volume_s, rule.min_s - spent_s, by_band_s)


def _step(memory: Memory, passed: float, rule: Conditioning) -> str:
    warm = "at temperature" if memory.in_band_ns != NEVER_NS else f"waiting for {rule.temperature_degC:g} degC"
    return f"{min(passed, rule.volumes):.1f} of {rule.volumes:g} volumes, {warm}"


def _too_late(scene: Scene, rule: Conditioning) -> Prompt:
    value = scene.view.value(scene.layout.jacket) if scene.layout.jacket else None
    found = "is not known" if value is None else f"is {value:.1f} degC"
    text = f"The jacket {found}, wanted {rule.temperature_degC:g} degC. Check the chiller, then resume or stop."
    return Prompt("conditioning-late", text)
