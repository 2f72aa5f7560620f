"""What people see of a run: state, phase, progress, time left, prompts, points, outcome."""

from __future__ import annotations

from rigd.logic.conduct import run_states
from rigd.logic.conduct.campaign import PhaseKind
from rigd.logic.conduct.checks import never_startable
from rigd.logic.conduct.state import ConductState
from rigd.logic.conduct.wants import PointResult
from rigd.logic.program import Program

_NO_CLOCK = (run_states.IDLE, run_states.HOLDING, run_states.HELD)


def summary(program: Program, state: ConductState, now_ns: int) -> dict[str, object]:
    """The keys state, phase, campaign and prompts of a snapshot; ready for JSON."""
    left_s = _phase_left_s(state, now_ns)
    return {
        "state": state.run,
        "phase": _phase(state, now_ns, left_s),
        "campaign": {
            "done": sum(1 for result in state.results if result.status != "interrupted"),
            "total": sum(1 for spec in state.campaign if spec.kind is PhaseKind.POINT),
            "left_s": _campaign_left_s(state, left_s),
        },
        "prompts": [{"id": p.id, "text": p.text} for p in state.prompts.values() if p.status == "open"],
    }


def points(state: ConductState) -> tuple[PointResult, ...]:
    """All points so far, in the order in which they ended."""
    return state.results


def outcome(state: ConductState) -> str:
    """ "" while it goes on, else done, stopped or refused."""
    if state.run == run_states.COMPLETE:
        return "done"
    if state.run in (run_states.STOPPED, run_states.ABORTED):
        return "stopped"
    if state.run == run_states.IDLE and state.called_off:
        return "stopped"
    return "refused" if state.run == run_states.IDLE and never_startable(state.layout) else ""


def _phase(state: ConductState, now_ns: int, left_s: float | None) -> dict[str, object]:
    if state.run == run_states.IDLE:
        return {
            "id": "prestart",
            "label": "Before the start",
            "point": "",
            "step": "",
            "progress": None,
            "left_s": None,
        }
    if run_states.over(state.run):
        return {"id": "", "label": state.run.lower(), "point": "", "step": "", "progress": 1.0, "left_s": 0.0}
    spent_s = (now_ns - state.since_ns) / 1e9
    progress = None if left_s is None else spent_s / max(spent_s + left_s, 1e-9)
    step = f"{state.step} ({state.hold_reason})" if state.spec.kind is PhaseKind.HOLD else state.step
    point = state.spec.point.id if state.spec.point and state.spec.kind is PhaseKind.POINT else ""
    return {
        "id": state.spec.id,
        "label": state.spec.label,
        "point": point,
        "step": step,
        "progress": progress,
        "left_s": left_s,
    }


def _phase_left_s(state: ConductState, now_ns: int) -> float | None:
    """The phase's own estimate; without one, what is left of the plan."""
    if state.run in _NO_CLOCK or state.run != run_states.RUNNING:
        return None
    if state.left_s is not None:
        return max(0.0, state.left_s)
    planned_s = state.plan.phases[state.index].duration_s
    return max(0.0, planned_s - (now_ns - state.since_ns) / 1e9)


def _campaign_left_s(state: ConductState, phase_left_s: float | None) -> float | None:
    if run_states.over(state.run):
        return 0.0
    if state.run == run_states.IDLE:
        return state.plan.duration_s
    if phase_left_s is None:
        return None
    return phase_left_s + sum(phase.duration_s for phase in state.plan.phases[state.index + 1 :])
