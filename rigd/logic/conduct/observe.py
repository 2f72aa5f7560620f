"""From the process image to what the phases see: syringes, valves, flow history, fronts, reagent in the bed or not."""

from __future__ import annotations

from dataclasses import replace

from rigd.logic.conduct.fronts import follow
from rigd.logic.conduct.layout import liquid_of
from rigd.logic.conduct.pumps import update
from rigd.logic.conduct.state import ConductState
from rigd.logic.conduct.wants import Scene
from rigd.logic.estimators import FlowHistory
from rigd.logic.view import View
from rigd.model.events import Event, EventKind

_KEEP_VOLUMES = 3.0


def observe(state: ConductState, view: View) -> tuple[ConductState, View, tuple[Event, ...]]:
    """Take in all samples newer than those used before. The view that comes back has exactly these as fresh."""
    seen = dict(state.seen)
    fresh = []
    for tag in state.layout.watch:
        sample = view.samples.get(tag)
        if sample is not None and seen.get(tag) != sample.t_ns:
            seen[tag] = sample.t_ns
            fresh.append(tag)
    view = replace(view, fresh=frozenset(fresh))
    events: list[Event] = []
    tracks = {}
    for name, play in state.layout.pumps.items():
        tracks[name], more = update(state.tracks[name], play, view)
        events += more
    state = replace(state, tracks=tracks, seen=seen)
    state, more = _valves(state, view)
    events += more
    fronts, more = follow(state.fronts, state.layout, state.tracks, view.now_ns)
    events += more
    state = replace(state, fronts=fronts, histories=_histories(state), soiled_mL=_soiled(state, view.now_ns))
    return state, view, tuple(events)


def scene_of(state: ConductState, view: View) -> Scene:
    """What a phase sees."""
    return Scene(
        layout=state.layout,
        view=view,
        spec=state.spec,
        tracks=state.tracks,
        prompts=state.prompts,
        following_mL=state.following_mL,
        positions=state.positions,
        histories=state.histories,
        soiled_mL=soiled_mL(state, view.now_ns),
    )


def _valves(state: ConductState, view: View) -> tuple[ConductState, tuple[Event, ...]]:
    """Confirmed positions; "" while a valve moves or is lost. A valve turned by hand is where a person said."""
    positions, events = {}, []
    for valve in state.layout.rig.valves:
        if not valve.device:
            positions[valve.id] = state.by_hand.get(valve.id, valve.rest)
            continue
        value = view.value(f"{valve.id}.position")
        known = value is not None and 0 <= value < len(valve.positions)
        positions[valve.id] = valve.positions[int(value)] if known and value is not None else ""
        if positions[valve.id] not in ("", _last_position(state, valve.id)):
            text = f"{valve.id} is at {positions[valve.id]}."
            events.append(Event(EventKind.VALVE, valve.id, view.now_ns, text, {"position": positions[valve.id]}))
    if positions == state.positions:
        return state, ()
    last = {valve: position or _last_position(state, valve) for valve, position in positions.items()}
    return replace(state, positions=positions, last_positions=last), tuple(events)


def _last_position(state: ConductState, valve: str) -> str:
    return state.last_positions.get(valve, "")


def _histories(state: ConductState) -> tuple[FlowHistory, ...]:
    """Volume through each section of the trunk, at the time of the newest sample of a pump."""
    t_ns = max((track.t_ns for track in state.tracks.values()), default=0)
    if t_ns == 0:
        return state.histories
    sections = state.layout.path.sections
    before = state.histories or tuple(FlowHistory(_KEEP_VOLUMES * state.layout.trunk_mL) for _ in sections)
    return tuple(
        history.add(t_ns, sum(state.tracks[pump].delivered_at(t_ns) for pump in section.pumps))
        for section, history in zip(sections, before, strict=True)
    )


def _total_mL(state: ConductState, now_ns: int) -> float:
    return sum(track.delivered_at(now_ns) for track in state.tracks.values())


def _soiled(state: ConductState, now_ns: int) -> float | None:
    """Total delivered when a pump last delivered anything but solvent; ``None``: never in this run."""
    solvent = state.layout.program.is_solvent
    soiling = any(t.flow_mL_min > 0 and not solvent(liquid_of(t.active)) for t in state.tracks.values())
    return _total_mL(state, now_ns) if soiling else state.soiled_mL


def soiled_mL(state: ConductState, now_ns: int) -> float:
    """Solvent that must still go through before the bed counts as clean, by the chemistry sheet; lines included."""
    if state.soiled_mL is None:
        return 0.0
    sheet = state.layout.recipe.sheet
    longest_mL = max((play.feed.outlet_mL for play in state.layout.pumps.values()), default=0.0)
    lines_mL = longest_mL * len(state.layout.pumps)
    wanted_mL = (sheet.flush_volumes if sheet else 1.0) * state.layout.trunk_mL + lines_mL
    return max(0.0, wanted_mL - (_total_mL(state, now_ns) - state.soiled_mL))
