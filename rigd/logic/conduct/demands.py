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
    state = replace(state, tracks={name: one.track for name, one in charges.items()})
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
    dues = [one.due_ns for one in charges.values() if one.due_ns is not None]
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
            prompts[name] = Prompt(name, f"Turn {valve} to {wanted}, then confirm.")
            events.append(prompt_event(prompts[name], view.now_ns))
    if prompts == state.prompts and by_hand == state.by_hand:
        return state, ()
    return replace(state, prompts=prompts, by_hand=by_hand), tuple(events)
