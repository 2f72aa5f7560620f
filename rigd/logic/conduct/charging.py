"""From what a phase wants of the pumps to what they are told: which syringe is filled with what, and when to pause.

Rules. A syringe is filled only when it is empty or holds the same liquid, and only after its feed valve is confirmed at
that liquid. A pump never runs empty: it stops at a guard level unless the standby syringe may follow. A planned change
of liquid fills the standby syringe with the new one and lets the active one run out, so that nothing mixes but the
dead volume; an urgent one changes over at once and keeps the old liquid in the standby syringe, however much of the
new one is needed: a pump at rest may change over to fill the other syringe and back without a drop moving.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

from rigd.logic.conduct.layout import PumpLayout, liquid_of
from rigd.logic.conduct.pumps import EMPTY_mL, PumpTrack, start_fill, start_swap
from rigd.logic.conduct.wants import Want
from rigd.logic.demand import OneShot, PumpDemand
from rigd.model.devices import PumpState
from rigd.model.orders import Action
from rigd.model.recipe import Ramp

_WORTH_mL = 0.02
_RUN_OUT_mL = EMPTY_mL + 0.005
"""A single syringe counts as run out here; the rest mixes with what is drawn next, as the dead volume does."""


@dataclass(frozen=True, slots=True)
class Charge:
    """What one pump is told. ``waits`` when it wants to move and has no liquid; ``due_ns`` when to look again."""

    track: PumpTrack
    demand: PumpDemand
    position: str
    waits: bool
    due_ns: int | None = None


def charge(
    play: PumpLayout, track: PumpTrack, want: Want, at: Callable[[str], bool], ramp: Ramp, now_ns: int
) -> Charge:
    """Decide for one pump. ``at`` tells whether its feed valve is confirmed at a position."""
    before = track
    track = _fill_or_swap(play, track, want, at, now_ns)
    flow, due_ns = _flow(play, track, want, now_ns)
    if flow == 0.0:
        track = _broken(before, track)
    waits = flow == 0.0 and want.flow_mL_min > 0.0
    flow, ramp_due_ns, track = _ramped(flow, track, ramp, now_ns)
    flow = min(max(flow, play.pump.rate_min_mL_min), play.pump.rate_max_mL_min) if flow > 0.0 else 0.0
    label = track.fill.label if track.fill else want.label
    position = play.feed.position_of(liquid_of(label))
    dues = [due for due in (due_ns, ramp_due_ns) if due is not None]
    demand = PumpDemand(flow, _once(track))
    return Charge(track, demand, position or "", waits, min(dues) if dues else None)


def paused(charges: Mapping[str, Charge], before: Mapping[str, PumpTrack]) -> dict[str, Charge]:
    """All pumps at rest, because one of them waits for liquid."""
    return {
        name: replace(
            one,
            demand=replace(one.demand, flow_mL_min=0.0),
            track=replace(_broken(before[name], one.track), moving_ns=-1),
        )
        for name, one in charges.items()
    }


def _broken(before: PumpTrack, track: PumpTrack) -> PumpTrack:
    """A pump that is stopped while it delivers also ends a filling that was under way. (A new one goes out after.)"""
    if before.moving_ns < 0 or before.fill is None or track.fill is None or before.fill.ticket != track.fill.ticket:
        return track
    return replace(track, fill=replace(track.fill, broken=True))


def _once(track: PumpTrack) -> OneShot | None:
    """A broken filling is not asked for: a repeat of the old order and the new one would cross each other."""
    if track.fill and track.fill.broken:
        return None
    if track.fill:
        return OneShot(track.fill.ticket, Action.FILL, track.fill.volume_mL)
    return OneShot(track.swap, Action.SWAP, 0.0) if track.swap else None


def _fill_or_swap(play: PumpLayout, track: PumpTrack, want: Want, at: Callable[[str], bool], now_ns: int) -> PumpTrack:
    if track.fill is not None:
        return _still_wanted(track, want)
    if track.swap:
        return track
    if not track.at_rest and _flow(play, track, want, now_ns)[0] == 0.0:
        return track  # it is about to be stopped, and that would end the filling
    volume_mL = _dual_fill(play, track, want, now_ns) if play.dual else _single_fill(play, track, want, now_ns)
    if volume_mL > 0.0 and want.may_fill:
        position = play.feed.position_of(liquid_of(want.label))
        if position is None or not at(position):
            return track
        return start_fill(track, play, want.label, min(volume_mL, play.pump.stroke_mL), now_ns)
    return start_swap(track, play) if play.dual and _swap_now(play, track, want, now_ns) else track


def _still_wanted(track: PumpTrack, want: Want) -> PumpTrack:
    """Note whether anybody wants the filling that is under way; what has been drawn stays and is remembered."""
    fill = track.fill
    if fill is None:
        return track
    unwanted = fill.label != want.label or not (want.may_fill or want.flow_mL_min > 0.0)
    return track if unwanted is fill.unwanted else replace(track, fill=replace(fill, unwanted=unwanted))


def _swap_now(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> bool:
    """Whether the other syringe is to deliver, or to be the one that can be filled."""
    if track.standby_mL <= EMPTY_mL or now_ns - track.refused_ns < 2_000_000_000:
        return False
    level_mL = track.level_at(now_ns)
    if track.standby != want.label and track.active != want.label:
        return want.urgent and track.active == liquid_of(want.label)  # kept: the other syringe runs out first
    if track.standby != want.label:
        # The wanted liquid is used up and another is in the way: change over at rest, then fill and change back when
        # it is to be kept, or let it run out when not.
        spent = level_mL <= play.guard_mL(want.flow_mL_min)
        return spent and track.at_rest and want.may_fill and want.need_mL > 0.0
    if track.active != want.label:
        return want.urgent
    return want.swap


def _dual_fill(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> float:
    """How far the standby syringe should be filled now; 0 = not."""
    foreign = track.standby != want.label and track.standby_mL > EMPTY_mL
    here_mL = track.supply_mL(want.label, now_ns)
    reserve_mL = play.reserve_mL(want.flow_mL_min)
    missing_mL = want.need_mL + reserve_mL - here_mL
    if foreign or want.need_mL <= 0.0 or here_mL >= want.need_mL + play.guard_mL(want.flow_mL_min):
        return 0.0
    held_mL = track.standby_mL if track.standby == want.label else 0.0
    target_mL = min(held_mL + missing_mL, play.pump.stroke_mL, want.batch_mL + reserve_mL)
    if target_mL <= track.standby_mL + _WORTH_mL:
        return 0.0
    if track.active != want.label:
        enough_mL = 0.6 * min(want.need_mL, play.pump.stroke_mL, want.batch_mL)
        least_mL = play.guard_mL(want.flow_mL_min) + _WORTH_mL  # or it would be spent as soon as it delivers
        return 0.0 if here_mL >= max(enough_mL, least_mL) else target_mL
    little = missing_mL < 0.25 * play.pump.stroke_mL and here_mL >= want.level_mL
    if held_mL > EMPTY_mL and not want.swap and little:
        return 0.0  # not worth a filling of its own
    wanted_mL = max(min(want.level_mL, want.need_mL), lead_mL(play, target_mL - held_mL, want.flow_mL_min))
    return target_mL if track.level_at(now_ns) <= wanted_mL + play.guard_mL(want.flow_mL_min) else 0.0


def lead_mL(play: PumpLayout, volume_mL: float, flow_mL_min: float) -> float:
    """What flows out while a filling of this volume is prepared and drawn."""
    return 1.2 * flow_mL_min * (play.refill_s(volume_mL) + 4.0) / 60.0


def _single_fill(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> float:
    """How far the one syringe should be filled now; it must be at rest, and empty when it holds another liquid."""
    if want.need_mL <= 0.0 or not track.at_rest:
        return 0.0
    level_mL = track.level_at(now_ns)
    reserve_mL = play.reserve_mL(want.flow_mL_min)
    if track.active != want.label:
        return min(want.need_mL + reserve_mL, want.batch_mL + reserve_mL) if level_mL <= _RUN_OUT_mL else 0.0
    if level_mL > _single_needs_mL(play, want):
        return 0.0
    target_mL = min(want.need_mL + reserve_mL, want.batch_mL + reserve_mL, play.pump.stroke_mL)
    return target_mL if target_mL > level_mL + _WORTH_mL else 0.0


def _single_needs_mL(play: PumpLayout, want: Want) -> float:
    """Level below which a single syringe stops to fill."""
    guard_mL = play.guard_mL(want.flow_mL_min)
    wanted_mL = min(want.level_mL, want.need_mL, play.pump.stroke_mL - guard_mL - _WORTH_mL)
    return max(wanted_mL, 0.0) + guard_mL


def _flow(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> tuple[float, int | None]:
    """The flow that the liquid at hand allows, and when that must be looked at again."""
    wanted = want.flow_mL_min
    if wanted <= 0.0 or play.feed.position_of(liquid_of(want.label)) is None:
        return 0.0, None
    return _dual_flow(play, track, want, now_ns) if play.dual else _single_flow(play, track, want, now_ns)


def _dual_flow(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> tuple[float, int | None]:
    """As ``_flow``. Two rests need care: the change-over and the end of the second one may come within one sample."""
    wanted, level_mL = want.flow_mL_min, track.level_at(now_ns)
    own = track.active == want.label
    if want.urgent and not own and track.standby == want.label:
        return 0.0, None
    guard_mL = play.guard_mL(wanted)
    follows = track.standby_mL > EMPTY_mL and track.fill is None and (track.standby == want.label or not own)
    rests_mL = level_mL + track.standby_mL
    if follows and track.standby != want.label and rests_mL <= guard_mL:
        return _slow(play, wanted, rests_mL), now_ns + int(play.period_s * 1e9)
    if follows and own and rests_mL <= guard_mL:
        return 0.0, None
    if follows:
        return wanted, None
    if level_mL <= guard_mL or (_filling_outlasts(play, track, level_mL - guard_mL, wanted) and track.at_rest):
        return 0.0, None
    return wanted, now_ns + int(60e9 * (level_mL - guard_mL) / wanted)


def _filling_outlasts(play: PumpLayout, track: PumpTrack, level_mL: float, flow_mL_min: float) -> bool:
    """True when the filling under way takes longer than the liquid at hand: then resting pumps stay at rest."""
    if track.fill is None:
        return False
    return play.refill_s(track.fill.volume_mL - track.standby_mL) > 60.0 * level_mL / flow_mL_min


def _single_flow(play: PumpLayout, track: PumpTrack, want: Want, now_ns: int) -> tuple[float, int | None]:
    wanted, level_mL = want.flow_mL_min, track.level_at(now_ns)
    if track.fill is not None or track.state is PumpState.REFILLING:
        return 0.0, None
    if track.active == want.label:
        refills = want.may_fill and want.need_mL > 0.0
        floor_mL = _single_needs_mL(play, want) if refills else play.guard_mL(wanted)
        if level_mL <= floor_mL:
            return 0.0, None
        return wanted, now_ns + int(60e9 * (level_mL - floor_mL) / wanted)
    if level_mL <= _RUN_OUT_mL:
        return 0.0, None
    return _slow(play, wanted, level_mL), now_ns + int(play.period_s * 1e9)


def _slow(play: PumpLayout, wanted_mL_min: float, level_mL: float) -> float:
    """A flow that takes a rest out without coming to the end of it between two samples."""
    return min(wanted_mL_min, 60.0 * level_mL / (3.0 * max(play.period_s, 0.5)))


def _ramped(flow: float, track: PumpTrack, ramp: Ramp, now_ns: int) -> tuple[float, int | None, PumpTrack]:
    """From rest, a fraction of the flow until the step time has passed."""
    if flow <= 0.0:
        return 0.0, None, replace(track, moving_ns=-1)
    moving_ns = now_ns if track.moving_ns < 0 else track.moving_ns
    full_ns = moving_ns + int(ramp.step_s * 1e9)
    track = replace(track, moving_ns=moving_ns)
    if now_ns < full_ns and ramp.fraction_first < 1.0:
        return flow * ramp.fraction_first, full_ns, track
    return flow, None, track
