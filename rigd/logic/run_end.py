"""When a run is over and how it ended. A run is never over before every pump is confirmed stopped."""

from __future__ import annotations

from dataclasses import dataclass

from rigd.logic.arbitration import Memory
from rigd.logic.program import CUT_REQUEST, STOP_REQUEST, Program
from rigd.logic.protect import stops
from rigd.logic.protect.protection import ProtectState
from rigd.model.orders import Stop


@dataclass(frozen=True, slots=True)
class RunEnd:
    """How the run ended: ``done``, ``tripped``, ``stopped`` or ``refused``, the exit code, and a sentence."""

    outcome: str
    exit_code: int
    text: str


_TEXTS = {
    "done": "The recipe was carried out to its end; every pump is confirmed stopped.",
    "stopped": "The run was stopped before its end; every pump is confirmed stopped.",
    "refused": "The run was refused before anything moved; every pump is confirmed stopped.",
}


def run_end(program: Program, protect: ProtectState, memory: Memory, outcome: str, broken: str) -> RunEnd | None:
    """``outcome`` is what conduct says of itself, "" while it goes on; ``broken`` the error that ended it, or ""."""
    verdict = protect.verdict
    if verdict.stop >= Stop.QUENCH and (verdict.first_out or broken):
        return _after_stop(program, protect, broken) if verdict.stop_done else None
    if not outcome:
        return None
    samples = protect.signals.samples
    if not all(stops.is_stopped(program, memory, samples, pump) for pump in program.pumps):
        return None
    return RunEnd(outcome, 0 if outcome == "done" else 1, _TEXTS[outcome])


def _after_stop(program: Program, protect: ProtectState, broken: str) -> RunEnd:
    first_out = protect.verdict.first_out
    if first_out in (STOP_REQUEST, CUT_REQUEST):
        return RunEnd("stopped", 1, _TEXTS["stopped"])
    titles = {interlock.id: interlock.title for interlock in program.interlocks}
    cause = f"{first_out} ({titles[first_out]})" if first_out else f"an error of the sequence ({broken})"
    return RunEnd("tripped", 1, f"Tripped by {cause}; every pump is confirmed stopped.")
