"""One step of the sequence: look, follow the stops, answer, run the phase at work, say what is wanted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from rigd.logic import planning
from rigd.logic.conduct import hold, park, point, run_states
from rigd.logic.conduct.campaign import PhaseKind, PhaseSpec, campaign, switchover
from rigd.logic.conduct.demands import demand_for
from rigd.logic.conduct.layout import make_layout
from rigd.logic.conduct.observe import observe, scene_of
from rigd.logic.conduct.phases import STARTS, STEPS
from rigd.logic.conduct.point_memory import Memory
from rigd.logic.conduct.pumps import PumpTrack
from rigd.logic.conduct.requests import answer_all, prompt_event
from rigd.logic.conduct.state import HOLD_SPEC, ConductState, ConductStep
from rigd.logic.conduct.wants import Move, PointResult, Prompt, event
from rigd.logic.program import SECOND_NS, Program
from rigd.logic.view import View
from rigd.model.events import Event, EventKind
from rigd.model.orders import Stop

Told = tuple[ConductState, Sequence[Event]]
"""A new state, and what is to be told of it."""

_LONGEST_NS = SECOND_NS
_LONGEST_CALM_NS = 5 * SECOND_NS
_PHASES_PER_STEP = 12
_AT_WORK = (run_states.RUNNING, run_states.HOLDING, run_states.HELD, run_states.RESTARTING)


def initial(program: Program, now_ns: int) -> ConductState:
    """Before the first scan: idle, the checklist open."""
    layout = make_layout(program)
    prompts = {item.id: Prompt(item.id, item.text) for item in program.recipe.checklist}
    return ConductState(
        layout=layout,
        plan=planning.plan(program),
        campaign=campaign(program),
        started_ns=now_ns,
        tracks={name: PumpTrack() for name in layout.pumps},
        prompts=prompts,
        alert=layout.usual_alert,
    )


def advance(program: Program, state: ConductState, view: View) -> ConductStep:
    """The next step. Where nothing has happened that matters, the last one stands."""
    if _quiet(state, view):
        return ConductStep(state, state.demand, (), state.due_ns)
    return _think(state, view)


def _quiet(state: ConductState, view: View) -> bool:
    return (
        view.now_ns < state.due_ns
        and not view.requests
        and not view.outcomes
        and state.alert.isdisjoint(view.fresh)
        and view.verdict == state.verdict
    )


def _think(state: ConductState, view: View) -> ConductStep:
    events: list[Event] = []
    if state.due_ns == 0:
        events += [prompt_event(prompt, view.now_ns) for prompt in state.prompts.values()]
    state, view, seen = observe(state, view)
    events += seen
    state, more = _follow_stop(state, view)
    events += more
    state, answers, granted = answer_all(state, view)
    events += answers
    for command, by in granted:
        state, more = _command(state, view, command, by)
        events += more
    state, more = _hold_if_asked(state, view)
    events += more
    return _act(replace(state, verdict=view.verdict), view, events)


def _act(state: ConductState, view: View, events: list[Event]) -> ConductStep:
    """Run the phase at work until it wants to wait."""
    due_ns: int | None = None
    demand, wants = None, None
    calm = False
    if state.run in _AT_WORK:
        state, move, more = _work(state, view)
        events += more
        if move is not None:
            wants, due_ns, calm = move.wants, move.due_ns, move.calm
    if state.run == run_states.COMPLETE:
        wants = park.parked(scene_of(state, view))
    if wants is not None and view.verdict.stop < Stop.QUENCH:
        state, demand, demand_due_ns, asked = demand_for(state, view, wants)
        events += asked
        due_ns = min((due for due in (due_ns, demand_due_ns) if due is not None), default=None)
    calm = calm and not any(track.fill or track.swap for track in state.tracks.values())
    wake_ns = _wake_ns(state, view.now_ns, due_ns, calm)
    state = replace(state, demand=demand, due_ns=wake_ns, alert=_alert(state, calm))
    return ConductStep(state, demand, tuple(events), wake_ns)


def _wake_ns(state: ConductState, now_ns: int, due_ns: int | None, calm: bool) -> int:
    latest_ns = now_ns + (_LONGEST_CALM_NS if calm else _LONGEST_NS)
    if due_ns is None:
        return latest_ns
    if due_ns <= now_ns:
        return now_ns + state.layout.rig.scan_ns
    return min(due_ns, latest_ns)


def _work(state: ConductState, view: View) -> tuple[ConductState, Move[Any] | None, list[Event]]:
    events: list[Event] = []
    for _ in range(_PHASES_PER_STEP):
        move = _move(state, view)
        state, more = _after_move(state, view, move)
        events += more
        trouble = move.trouble or _pump_trouble(state)
        if trouble:
            state, more = _command(state, view, "HOLD", trouble)
            events += more
            if more:
                continue
        if not move.done:
            return state, move, events
        state, more = _finish(state, view)
        events += more
        if state.run not in _AT_WORK:
            return state, None, events
    return state, replace(move, due_ns=view.now_ns, calm=False), events


def _move(state: ConductState, view: View) -> Move[Any]:
    scene = scene_of(state, view)
    if state.run == run_states.HELD:
        return hold.held(scene, state.memory)  # type: ignore[arg-type]
    return STEPS[state.spec.kind](scene, state.memory)


def _pump_trouble(state: ConductState) -> str:
    if run_states.following(state.run, "HOLD") is None:
        return ""
    return next((track.trouble for track in state.tracks.values() if track.trouble), "")


def _after_move(state: ConductState, view: View, move: Move[Any]) -> Told:
    """Keep what the phase remembers and tell what it tells."""
    events = list(move.events)
    stage = getattr(move.memory, "step", "") or getattr(move.memory, "stage", "")
    if stage and state.stage and stage != state.stage:
        events.insert(0, _phase_event(state.spec, view.now_ns, stage))
    prompts = dict(state.prompts)
    if move.prompt and move.prompt.id not in prompts:
        prompts[move.prompt.id] = move.prompt
        events.append(prompt_event(move.prompt, view.now_ns))
    results = _with_result(state.results, move.result)
    state = replace(
        state,
        memory=move.memory,
        stage=stage,
        step=move.step,
        left_s=move.left_s,
        prompts=prompts,
        results=results,
        circulate=move.wants.circulate,
        bath_degC=state.bath_degC if move.wants.temperature_degC is None else move.wants.temperature_degC,
    )
    return state, events


def _with_result(results: tuple[PointResult, ...], result: PointResult | None) -> tuple[PointResult, ...]:
    """One result per point: the last."""
    if result is None:
        return results
    return (*(one for one in results if one.id != result.id), result)


def _follow_stop(state: ConductState, view: View) -> Told:
    """Stops are protect's; the sequence only lets go, and notes the end."""
    stop = view.verdict.stop
    events: Sequence[Event] = ()
    if stop >= Stop.QUENCH and state.run != run_states.IDLE:
        cause = view.verdict.first_out or "a stop"
        state, events = _command(state, view, "ABORT" if stop is Stop.CUT else "STOP", cause)
    if state.run in (run_states.STOPPING, run_states.ABORTING) and (view.verdict.stop_done or stop < Stop.QUENCH):
        state, more = _command(state, view, run_states.END, "the stop is complete")
        events = [*events, *more]
    return state, events


def _hold_if_asked(state: ConductState, view: View) -> Told:
    wanted = view.verdict.hold_wanted or (view.verdict.first_out if view.verdict.stop is Stop.HOLD else "")
    if not wanted:
        return state, []
    return _command(state, view, "HOLD", wanted)


def _command(state: ConductState, view: View, command: str, by: str) -> Told:
    """Change the run state, if the table allows it, and begin what belongs to the new one."""
    following = run_states.following(state.run, command)
    if following is None:
        return state, []
    text = f"The run is {following.lower()} (was {state.run.lower()}): {by}."
    fields = {"from": state.run, "by": by}
    events = [Event(EventKind.RUN_STATE, following, view.now_ns, text, fields)]
    if command in ("HOLD", "STOP", "ABORT"):
        state, more = _break_off(state, view)
        events += more
    state = replace(state, run=following)
    if command == "START":
        state, more = _enter(state, view, state.campaign[0])
    elif command == "HOLD":
        state, more = _enter(replace(state, hold_reason=by, queue=()), view, HOLD_SPEC)
    elif command == "RESTART":
        tracks = {name: replace(track, trouble="") for name, track in state.tracks.items()}
        state, more = _restart(replace(state, tracks=tracks), view)
    else:
        return state, events
    return state, [*events, *more]


def _break_off(state: ConductState, view: View) -> Told:
    if state.spec.kind is not PhaseKind.POINT or not isinstance(state.memory, Memory):
        return state, ()
    found, events = point.broken_off(scene_of(state, view), state.memory)
    return replace(state, results=_with_result(state.results, found)), events


def _restart(state: ConductState, view: View) -> Told:
    """What a restart does before the interrupted phase begins anew."""
    interrupted = state.campaign[state.index]
    queue: list[PhaseSpec] = []
    if interrupted.kind is PhaseKind.POINT or (interrupted.kind is PhaseKind.SWITCHOVER and interrupted.reagent):
        queue.append(PhaseSpec(PhaseKind.RESTART, "restart", "Restart after a hold", point=interrupted.point))
    if interrupted.kind is PhaseKind.POINT and interrupted.reagent:
        queue.append(switchover("restart-switchover", True, interrupted.point, slow=0.5))
    if queue:
        return _enter(replace(state, queue=tuple(queue)), view, queue[0])
    return _resumed(state, view)


def _resumed(state: ConductState, view: View) -> Told:
    state, events = _command(state, view, run_states.END, "restarted")
    state, more = _enter(state, view, state.campaign[state.index])
    return state, [*events, *more]


def _finish(state: ConductState, view: View) -> Told:
    """The phase at work is done: what comes next?"""
    if state.run == run_states.HOLDING:
        return _command(state, view, run_states.END, state.hold_reason)
    if state.run == run_states.RESTARTING:
        queue = state.queue[1:]
        state = replace(state, queue=queue)
        return _enter(state, view, queue[0]) if queue else _resumed(state, view)
    if state.index + 1 >= len(state.campaign):
        return _command(state, view, run_states.END, "the recipe is done")
    state = replace(state, index=state.index + 1)
    return _enter(state, view, state.campaign[state.index])


def _enter(state: ConductState, view: View, spec: PhaseSpec) -> Told:
    following = _following_mL(state, spec)
    state = replace(state, spec=spec, since_ns=view.now_ns, stage="", step="", left_s=None, following_mL=following)
    state = replace(state, memory=STARTS[spec.kind](scene_of(state, view)))
    return state, [_phase_event(spec, view.now_ns, "")]


def _following_mL(state: ConductState, spec: PhaseSpec) -> dict[str, tuple[tuple[float, float], ...]]:
    """What comes after the phase; a restart's switchover also charges for the point that it leads to."""
    if spec.kind in (PhaseKind.HOLD, PhaseKind.RESTART):
        return {}
    found = state.plan.following_mL(state.index)
    if spec is not state.campaign[state.index]:
        phase = state.plan.phases[state.index]
        for pump, volume_mL in phase.volumes_mL.items():
            found[pump] = ((volume_mL, phase.ready_mL.get(pump, volume_mL)), *found.get(pump, ()))
    return found


def _phase_event(spec: PhaseSpec, now_ns: int, stage: str) -> Event:
    name = spec.point.id if spec.point and spec.kind is PhaseKind.POINT else ""
    text = f"{spec.label}: {stage}." if stage else f"{spec.label} begins."
    return event(EventKind.PHASE, spec.id, now_ns, text, step=stage, point=name, label=spec.label)


def _alert(state: ConductState, calm: bool) -> frozenset[str]:
    """Tags whose new samples are acted on at once."""
    if calm:
        return state.layout.calm_alert
    pressure = state.spec.kind in (PhaseKind.LEAK_TEST, PhaseKind.PARK)
    return state.layout.pressure_alert if pressure else state.layout.usual_alert
