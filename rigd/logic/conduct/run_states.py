"""Run states: the procedural states of the batch standard, as a pure reducer over one literal table.

After the example machine of IEC 61512-1 / ANSI/ISA-88.00.01 (tests/reference/procedure.csv, every row tested). Hold is
a deviation that can be resumed and always comes back through RESTARTING; STOP is the quench, ABORT the cut.
"""

from __future__ import annotations

from transitions import Machine

IDLE = "IDLE"
RUNNING = "RUNNING"
PAUSING = "PAUSING"
PAUSED = "PAUSED"
HOLDING = "HOLDING"
HELD = "HELD"
RESTARTING = "RESTARTING"
STOPPING = "STOPPING"
STOPPED = "STOPPED"
ABORTING = "ABORTING"
ABORTED = "ABORTED"
COMPLETE = "COMPLETE"

STATES = (
    IDLE, RUNNING, PAUSING, PAUSED, HOLDING, HELD, RESTARTING, STOPPING, STOPPED, ABORTING, ABORTED, COMPLETE,
)  # fmt: skip

END = "end"
_STOPPABLE = (RUNNING, PAUSING, PAUSED, HOLDING, HELD, RESTARTING)

_MACHINE = Machine(
    model=None,
    states=list(STATES),
    initial=IDLE,
    auto_transitions=False,
    transitions=[
        ["START", IDLE, RUNNING],
        [END, RUNNING, COMPLETE],
        ["PAUSE", RUNNING, PAUSING],
        [END, PAUSING, PAUSED],
        ["RESUME", PAUSED, RUNNING],
        ["HOLD", [RUNNING, PAUSING, PAUSED, RESTARTING], HOLDING],
        [END, HOLDING, HELD],
        ["RESTART", HELD, RESTARTING],
        [END, RESTARTING, RUNNING],
        ["STOP", list(_STOPPABLE), STOPPING],
        [END, STOPPING, STOPPED],
        ["ABORT", [*_STOPPABLE, STOPPING], ABORTING],
        [END, ABORTING, ABORTED],
        ["RESET", [COMPLETE, STOPPED, ABORTED], IDLE],
    ],
)


def following(state: str, command: str) -> str | None:
    """The state after a command, or after the ``end`` of what a state does; ``None`` when it is not allowed there."""
    found = _MACHINE.get_transitions(command, state)
    return str(found[0].dest) if found else None


def over(state: str) -> bool:
    """True when nothing more will happen in this run without a reset."""
    return state in (COMPLETE, STOPPED, ABORTED)
