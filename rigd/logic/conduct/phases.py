"""Which function runs which kind of phase, and how each begins."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from rigd.logic.conduct import conditioning, hold, leak_test, park, point, prime, switchover
from rigd.logic.conduct.campaign import PhaseKind
from rigd.logic.conduct.wants import Move, Scene

STARTS: Mapping[PhaseKind, Callable[[Scene], Any]] = {
    PhaseKind.PRIME: lambda scene: prime.Memory(),
    PhaseKind.CONDITIONING: conditioning.start,
    PhaseKind.LEAK_TEST: leak_test.start,
    PhaseKind.SWITCHOVER: switchover.start,
    PhaseKind.POINT: point.start,
    PhaseKind.FLUSH: lambda scene: prime.Memory(),
    PhaseKind.PARK: park.start,
    PhaseKind.HOLD: hold.start_hold,
    PhaseKind.RESTART: hold.start_restart,
}

STEPS: Mapping[PhaseKind, Callable[[Scene, Any], Move[Any]]] = {
    PhaseKind.PRIME: prime.prime,
    PhaseKind.CONDITIONING: conditioning.step,
    PhaseKind.LEAK_TEST: leak_test.step,
    PhaseKind.SWITCHOVER: switchover.step,
    PhaseKind.POINT: point.step,
    PhaseKind.FLUSH: prime.flush,
    PhaseKind.PARK: park.step,
    PhaseKind.HOLD: hold.holding,
    PhaseKind.RESTART: hold.restart,
}
