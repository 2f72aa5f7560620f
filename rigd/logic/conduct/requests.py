"""Requests that the sequence answers: START, HOLD, RESUME, CONFIRM. Each gets exactly one answer."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace

from rigd.logic.conduct import run_states
from rigd.logic.conduct.checks import not_ready
from rigd.logic.conduct.state import ConductState
from rigd.logic.conduct.wants import Prompt, event
from rigd.logic.view import View
from rigd.model.events import Event, EventKind
from rigd.model.orders import Request, Stop, Verb

Answer = tuple[ConductState, str, tuple[Event, ...]]
"""New state, "" or why it is refused, events besides the answer."""


def answer_all(state: ConductState, view: View) -> tuple[ConductState, tuple[Event, ...], tuple[tuple[str, str], ...]]:
    """Answer what is new. The last result holds the commands (START, HOLD, RESTART) that were granted, and to whom."""
    events: list[Event] = []
    granted: list[tuple[str, str]] = []
    for request in view.requests:
        if request.verb in (Verb.STOP, Verb.CUT):
            state = replace(state, called_off=state.called_off or state.run == run_states.IDLE)
        handler = _HANDLERS.get(request.verb)
        if handler is None:
            continue
        state, refusal, more = handler(state, view, request)
        events += [*more, _answered(request, refusal, view.now_ns)]
        command = _COMMANDS.get(request.verb)
        if command and not refusal:
            granted.append((command, f"asked for by {request.who or 'nobody'}"))
    return state, tuple(events), tuple(granted)


def _answered(request: Request, refusal: str, now_ns: int) -> Event:
    result = "refused" if refusal else "accepted"
    text = f"{request.verb} by {request.who or 'nobody'}: {result}" + (f", {refusal}." if refusal else ".")
    fields = {"request_id": request.id, "who": request.who, "result": result, "detail": refusal}
    return Event(EventKind.REQUEST, str(request.verb), now_ns, text, fields)


def _start(state: ConductState, view: View, request: Request) -> Answer:
    if state.run != run_states.IDLE:
        return state, f"the run is {state.run}", ()
    if state.called_off:
        return state, "the run was called off", ()
    return state, "; ".join(not_ready(state.layout, view, state.prompts)), ()


def _hold(state: ConductState, view: View, request: Request) -> Answer:
    if run_states.following(state.run, "HOLD") is None:
        return state, f"the run is {state.run}", ()
    return state, "", ()


def _resume(state: ConductState, view: View, request: Request) -> Answer:
    if state.run != run_states.HELD:
        return state, f"the run is {state.run}, not held", ()
    if view.verdict.hold_wanted:
        return state, f"{view.verdict.hold_wanted} still asks for a hold", ()
    if not view.verdict.permit or view.verdict.stop is not Stop.NONE:
        return state, "an interlock is tripped or was not reset", ()
    prompts, events = withdraw(state.prompts, view.now_ns, request.who)
    return replace(state, prompts=prompts), "", events


def _confirm(state: ConductState, view: View, request: Request) -> Answer:
    if not request.who:
        return state, "a confirmation needs a name", ()
    chosen = [p for p in state.prompts.values() if p.status == "open" and request.target in ("*", p.id)]
    if not chosen:
        return state, f"nothing called {request.target!r} waits for a person", ()
    prompts = dict(state.prompts)
    events = []
    for prompt in chosen:
        prompts[prompt.id] = replace(prompt, status="confirmed", who=request.who)
        events.append(prompt_event(prompts[prompt.id], view.now_ns))
    return replace(state, prompts=prompts), "", tuple(events)


def withdraw(prompts: Mapping[str, Prompt], now_ns: int, who: str) -> tuple[dict[str, Prompt], tuple[Event, ...]]:
    """Close what is open; what was answered may be asked again."""
    opened = [replace(p, status="withdrawn", who=who) for p in prompts.values() if p.status == "open"]
    return {}, tuple(prompt_event(prompt, now_ns) for prompt in opened)


def prompt_event(prompt: Prompt, now_ns: int) -> Event:
    """What has become of a prompt."""
    return event(
        EventKind.PROMPT, prompt.id, now_ns, prompt.text, text=prompt.text, status=prompt.status, who=prompt.who
    )


_HANDLERS: Mapping[Verb, Callable[[ConductState, View, Request], Answer]] = {
    Verb.START: _start,
    Verb.HOLD: _hold,
    Verb.RESUME: _resume,
    Verb.CONFIRM: _confirm,
}
_COMMANDS = {Verb.START: "START", Verb.HOLD: "HOLD", Verb.RESUME: "RESTART"}
