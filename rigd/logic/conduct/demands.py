"""From what a phase wants to the demand: pumps through ``charging``, valves, baths; prompts for valves by hand."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from rigd.logic.conduct.campaign import PhaseKind
from rigd.logic.conduct.charging import Charge, charge, paused
from rigd.logic.conduct.layout import PumpLayout
from rigd.logic.conduct.requests import prompt_event
from rigd.logic.conduct.state import ConductState
from rigd.logic.conduct.wants import Prompt, Want, Wants
from rigd.logic.demand import BathDemand, Demand
from rigd.logic.view import View
from rigd.model.events import Event
from rigd.model.orders import Authority

HAND_NS = 600_000_000_000
"""So long a person has to turn a valve: ten minutes of process time (proposal; no source)."""


def demand_for(
    state: ConductState, view: View, wants: Wants
) -> tuple[ConductState, Demand, int | None, tuple[Event, ...]]:
    """The demand, the pumps' new tracks in the state, and when to look again."""
    charges = _charges(state, view, wants)
    valves = {state.layout.pumps[name].feed.valve: one.position for name, one in charges.items() if one.position}
    if state.layout.path.outlet_valve and wants.outlet in state.layout.path.outlets:
        valves[state.layout.path.outlet_valve] = wants.outlet
    valves.pop("", None)
    state, events = _by_hand(state, view, valves)
    state, hand_due_ns = _late_hand(replace(state, tracks={n: one.track for n, one in charges.items()}), view)
    baths = {}
    if state.bath_degC is not None:
        baths = {chiller.id: BathDemand(state.bath_degC, state.circulate) for chiller in state.layout.rig.chillers}
    demand = Demand(
        authority=Authority.HOLD if state.spec.kind is PhaseKind.HOLD else Authority.SEQUENCE,
        source=state.spec.id,
        pumps={name: one.demand for name, one in charges.items()},
        valves=valves,
        baths=baths,
    )
    dues = [due for due in (hand_due_ns, *(one.due_ns for one in charges.values())) if due is not None]
    return state, demand, min(dues, default=None), events


def _charges(state: ConductState, view: View, wants: Wants) -> dict[str, Charge]:
    charges = {
        name: charge(
            play,
            state.tracks[name],
            wants.pumps.get(name) or Want(play.solvent or play.reagent, may_fill=False),
            _at(state, play),
            state.layout.recipe.ramp,
            view.now_ns,
        )
        for name, play in state.layout.pumps.items()
    }
    if wants.together and any(one.waits for one in charges.values()):
        return paused(charges, state.tracks)
    return charges


def _at(state: ConductState, play: PumpLayout) -> Callable[[str], bool]:
    valve = play.feed.valve
    return lambda position: not valve or state.positions.get(valve) == position


def _by_hand(state: ConductState, view: View, valves: dict[str, str]) -> tuple[ConductState, tuple[Event, ...]]:
    """Ask a person to turn a valve that has no drive; believe the confirmation."""
    prompts, by_hand, events = dict(state.prompts), dict(state.by_hand), []
    for valve in state.layout.hand_valves & valves.keys():
        wanted = valves.pop(valve)
        name = f"valve-{valve}-{wanted}"
        if prompts.get(name, Prompt("", "")).status == "confirmed":
            by_hand[valve] = wanted
            del prompts[name]
        elif state.positions.get(valve) != wanted and name not in prompts:
            prompts[name] = Prompt(name, f"Turn {valve} to {wanted}, then confirm.", since_ns=view.now_ns)
            events.append(prompt_event(prompts[name], view.now_ns))
    if prompts == state.prompts and by_hand == state.by_hand:
        return state, ()
    return replace(state, prompts=prompts, by_hand=by_hand), tuple(events)


def _late_hand(state: ConductState, view: View) -> tuple[ConductState, int | None]:
    """A valve that nobody turns for ``HAND_NS`` is trouble, and the run holds. Also when the next one would be late."""
    asked = [one for one in state.prompts.values() if one.status == "open" and one.since_ns]
    late = next((one for one in asked if view.now_ns >= one.since_ns + HAND_NS), None)
    if late is not None and not any(track.trouble for track in state.tracks.values()):
        text = f"nobody has confirmed within {HAND_NS / 60e9:g} min: {late.text}"
        first, track = next(iter(state.tracks.items()))
        return replace(state, tracks={**state.tracks, first: replace(track, trouble=text)}), view.now_ns + 1
    dues = [one.since_ns + HAND_NS for one in asked]
    return state, min((due for due in dues if due > view.now_ns), default=None)
