"""The core, composed: protect, then conduct. Nothing is decided here.

``scan(program, state, intake, now_ns)`` is pure: the same arguments give the same step on any machine.
"""

from __future__ import annotations

from dataclasses import dataclass

from rigd.logic.program import Program
from rigd.model.events import Event
from rigd.model.intake import Intake
from rigd.model.orders import Order


@dataclass(frozen=True, slots=True)
class CoreState:
    """Everything that the core remembers between two scans; opaque to the shells."""


@dataclass(frozen=True, slots=True)
class Step:
    """What one scan (or half of one) decided; ``wake_ns`` is the next time at which something is due."""

    state: CoreState
    orders: tuple[Order, ...]
    events: tuple[Event, ...]
    wake_ns: int


@dataclass(frozen=True, slots=True)
class RunEnd:
    """How the run ended: ``done``, ``tripped``, ``stopped`` or ``refused``, the exit code, and a sentence."""

    outcome: str
    exit_code: int
    text: str


def initial(program: Program, now_ns: int) -> CoreState:
    """The state before the first scan: everything tripped, nothing ordered."""
    raise NotImplementedError


def protect(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """First half: signals, alarms, interlocks, stops. Its orders leave before ``conduct`` is entered."""
    raise NotImplementedError


def conduct(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """Second half: the recipe. Never raises: an error inside is a cause of a cut in the next ``protect``."""
    raise NotImplementedError


def scan(program: Program, state: CoreState, intake: Intake, now_ns: int) -> Step:
    """Both halves, orders and events in the order in which they were decided."""
    raise NotImplementedError


def snapshot(program: Program, state: CoreState, now_ns: int) -> dict[str, object]:
    """``rigd.ports.door.SNAPSHOT_KEYS`` except ``run`` and ``utc``, ready for JSON."""
    raise NotImplementedError


def run_end(program: Program, state: CoreState) -> RunEnd | None:
    """How the run ended, once it is over and every pump is confirmed stopped; ``None`` before."""
    raise NotImplementedError
