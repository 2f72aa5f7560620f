"""A filling that a stop has ended, and one that the pump says no to, seen from conduct's track of the pump."""

from __future__ import annotations

from dataclasses import replace

from fakes.conduct_rigs import demo_recipe, sweep_point, two_pumps

from rigd.logic.conduct import pumps
from rigd.logic.conduct.charging import Charge, charge, paused
from rigd.logic.conduct.layout import PumpLayout, make_layout
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.conduct.wants import Want
from rigd.logic.program import compile_program
from rigd.logic.view import Verdict, View
from rigd.model.devices import PumpState
from rigd.model.orders import Action, Outcome, Result
from rigd.model.recipe import Ramp
from rigd.model.samples import Sample

SECOND = 1_000_000_000


def play() -> PumpLayout:
    recipe = demo_recipe((sweep_point("P1", 2.0),), True)
    layout = make_layout(compile_program(two_pumps(2), recipe))
    return next(one for one in layout.pumps.values() if one.reagent)


def seen(
    track: PumpTrack, one: PumpLayout, now_s: float, outcome: Result | None = None, **channels: float
) -> PumpTrack:
    now_ns = int(now_s * SECOND)
    samples = {one.tag(name): Sample(one.tag(name), value, now_ns) for name, value in channels.items()}
    outcomes = () if outcome is None else (Outcome(7, one.id, Action.FILL, outcome, now_ns),)
    view = View(now_ns, samples, Verdict(permit=True), outcomes, fresh=frozenset(samples))
    return pumps.update(track, one, view)[0]


def filling(one: PumpLayout) -> PumpTrack:
    """A pump that delivers from a nearly empty syringe while the other one is being filled."""
    track = PumpTrack(active=one.reagent, standby=one.reagent, level_mL=0.06, standby_mL=2.0, t_ns=1, moving_ns=1)
    track = replace(track, state=PumpState.DELIVERING, flow_mL_min=2.0)
    return pumps.start_fill(track, one, one.reagent, 3.9, 0)


def told(one: PumpLayout, track: PumpTrack, now_s: float) -> Charge:
    want = Want(one.reagent, 2.0, need_mL=4.0)
    return charge(one, track, want, lambda position: True, Ramp(), int(now_s * SECOND))


def test_a_filling_that_a_pause_has_ended_is_not_asked_for_until_the_pump_rests() -> None:
    """Otherwise the repeat of the superseded order and the new ticket cross each other and the pump refuses one."""
    one = play()
    track = filling(one)
    before = {one.id: track}
    held = paused({one.id: told(one, track, 1.0)}, before)[one.id]
    assert held.track.fill is not None
    assert held.track.fill.broken
    after = told(one, held.track, 1.2)
    assert after.demand.once is None
    rests = seen(after.track, one, 2.0, level=0.05, standby=2.1, flow=0.0, state=PumpState.STOPPED)
    assert rests.fill is not None
    assert track.fill is not None
    assert rests.fill.ticket != track.fill.ticket
    once = told(one, rests, 2.1).demand.once
    assert once is not None
    assert once.ticket == rests.fill.ticket


def test_a_refusal_is_not_answered_at_once() -> None:
    one = play()
    track = filling(one)
    assert track.fill is not None
    first = track.fill.ticket
    track = seen(track, one, 1.0, Result.REFUSED)
    assert track.fill is not None
    assert track.fill.ticket == first
    track = seen(track, one, 1.0 + 1.9, level=0.06, standby=2.0, flow=2.0, state=PumpState.DELIVERING)
    assert track.fill is not None
    assert track.fill.ticket == first
    track = seen(track, one, 1.0 + 2.1, level=0.06, standby=2.0, flow=2.0, state=PumpState.DELIVERING)
    assert track.fill is not None
    assert track.fill.ticket != first
    assert track.fill.attempt == 2


def test_a_refusal_by_a_pump_that_fills_all_the_same_costs_no_attempt() -> None:
    one = play()
    track = seen(filling(one), one, 1.0, Result.REFUSED)
    for second in range(2, 12):
        standby = 2.0 + 0.15 * (second - 1)
        track = seen(track, one, second, level=0.06, standby=standby, flow=2.0, state=PumpState.DELIVERING)
    assert track.fill is not None
    assert track.fill.attempt == 1
    assert track.trouble == ""


def test_a_pump_that_keeps_refusing_is_in_trouble_after_a_while() -> None:
    one = play()
    track = filling(one)
    now_s = 1.0
    while not track.trouble and now_s < 60.0:
        track = seen(track, one, now_s, Result.REFUSED)
        now_s += 2.5
        track = seen(track, one, now_s, level=0.06, standby=2.0, flow=2.0, state=PumpState.DELIVERING)
    assert "does not fill" in track.trouble
    assert 6.0 < now_s < 30.0
