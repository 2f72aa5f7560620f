"""Liquids one after another through each pump: what priming, rinsing and flushing have in common."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from rigd.logic.conduct.layout import PumpLayout, liquid_of
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.conduct.wants import Scene, Want


@dataclass(frozen=True, slots=True)
class Dose:
    """``volume_mL`` of a liquid to be delivered. Solvent comes in two batches, one for each of two syringes."""

    label: str
    volume_mL: float

    def batch_mL(self, play: PumpLayout) -> float:
        """Size of one filling."""
        return max(self.volume_mL / 2, 0.1) if play.dual and "~" not in self.label else self.volume_mL


@dataclass(frozen=True, slots=True)
class Dosing:
    """How far one pump is: index of the dose, and its counter when that dose began to leave (``None``: not yet).

    ``done_mL`` had left before another liquid came between, as a hold can make it.
    """

    index: int = 0
    mark_mL: float | None = None
    done_mL: float = 0.0


def dose_all(
    scene: Scene, doses: Mapping[str, Sequence[Dose]], memory: Mapping[str, Dosing], flows: Mapping[str, float]
) -> tuple[dict[str, Dosing], dict[str, Want], bool]:
    """Move every pump on. Returns the new memory, the wants, and whether all are done."""
    after: dict[str, Dosing] = {}
    wants: dict[str, Want] = {}
    for name, play in scene.layout.pumps.items():
        row = doses.get(name, ())
        after[name] = _advanced(memory.get(name, Dosing()), row, scene.tracks[name], scene.now_ns)
        wants[name] = _want(play, row, after[name], scene, flows.get(name, 0.0))
    return after, wants, all(dosing.index >= len(doses.get(name, ())) for name, dosing in after.items())


def passed_mL(dosing: Dosing, track: PumpTrack, now_ns: int) -> float:
    """How much of the present dose has left the syringe."""
    since_mL = 0.0 if dosing.mark_mL is None else track.delivered_at(now_ns) - dosing.mark_mL
    return dosing.done_mL + max(0.0, since_mL)


def left_s(
    scene: Scene, doses: Mapping[str, Sequence[Dose]], memory: Mapping[str, Dosing], flows: Mapping[str, float]
) -> float:
    """Time until the slowest pump is done, refills not counted."""
    longest = 0.0
    for name, dosing in memory.items():
        row = doses.get(name, ())[dosing.index :]
        left_mL = sum(dose.volume_mL for dose in row) - passed_mL(dosing, scene.tracks[name], scene.now_ns)
        if row and flows.get(name, 0.0) > 0:
            longest = max(longest, 60.0 * left_mL / flows[name])
    return longest


def _advanced(dosing: Dosing, row: Sequence[Dose], track: PumpTrack, now_ns: int) -> Dosing:
    if dosing.index >= len(row):
        return dosing
    if track.active != row[dosing.index].label:
        if dosing.mark_mL is None:
            return dosing
        done_mL = dosing.done_mL + max(0.0, track.front.start_mL - dosing.mark_mL)
        return Dosing(dosing.index, None, done_mL)
    if dosing.mark_mL is None:
        start_mL = track.delivered_at(now_ns) if dosing.index == 0 else track.front.start_mL
        dosing = replace(dosing, mark_mL=start_mL)
    if passed_mL(dosing, track, now_ns) < row[dosing.index].volume_mL:
        return dosing
    return Dosing(dosing.index + 1)


def _want(play: PumpLayout, row: Sequence[Dose], dosing: Dosing, scene: Scene, flow: float) -> Want:
    if dosing.index >= len(row):
        return Want(row[-1].label if row else play.solvent)
    dose = row[dosing.index]
    track = scene.tracks[play.id]
    need_mL = max(0.0, dose.volume_mL - passed_mL(dosing, track, scene.now_ns))
    keeps = "~" in dose.label and track.active == liquid_of(dose.label)  # pure liquid is not run out for a rinse
    level_mL = need_mL if play.dual else 0.0
    return Want(dose.label, flow, need_mL, level_mL, dose.batch_mL(play), urgent=keeps)


def dose_due_ns(
    scene: Scene, doses: Mapping[str, Sequence[Dose]], memory: Mapping[str, Dosing], flows: Mapping[str, float]
) -> int | None:
    """When the next dose will have been delivered at the present flows."""
    dues = []
    for name, dosing in memory.items():
        row = doses.get(name, ())
        flow = scene.tracks[name].flow_mL_min
        if dosing.index < len(row) and dosing.mark_mL is not None and flow > 0:
            left_mL = row[dosing.index].volume_mL - passed_mL(dosing, scene.tracks[name], scene.now_ns)
            dues.append(scene.now_ns + int(60e9 * max(left_mL, 0.0) / flow) + 1_000_000)
    return min(dues) if dues else None
