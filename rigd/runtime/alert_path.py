"""Is there still a way to wake somebody? The front says so every few seconds; silence of the front counts as a no.

An unattended run whose alert path is down for longer than its permit allows ends in a quench (``ALERTS-DOWN``). What is
known is what became of the alerts that were sent: a channel that has nothing to say is not tried.
"""

from __future__ import annotations

from collections.abc import Callable

from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.ports.door import WAKING

SILENT_S = 10.0
"""A front that said nothing for this long [wall] is taken for gone."""


class AlertPath:
    """``allowed_s``: how long it may be down [wall]; 0 watches nothing."""

    def __init__(self, allowed_s: float, wall_ns: Callable[[], int]) -> None:
        self._allowed_s, self._wall_ns = allowed_s, wall_ns
        self._up_s = self._heard_s = wall_ns() / 1e9
        self._why = ""

    def heard(self, why: str) -> None:
        """The front's word: "" when somebody can be alerted, else why nobody can."""
        self._why, self._heard_s = why, self._wall_ns() / 1e9
        if not why:
            self._up_s = self._heard_s

    def fault(self) -> str:
        """Why the run may not go on, "" as long as it may."""
        now_s = self._wall_ns() / 1e9
        if not self._allowed_s or now_s - self._up_s <= self._allowed_s:
            return ""
        if now_s - self._heard_s > SILENT_S:
            why = "the process that sends alerts has gone silent"
        elif self._why:
            why = self._why
        else:
            return ""
        return (
            f"nobody could be alerted for {now_s - self._up_s:.0f} s, the permit allows {self._allowed_s:.0f} s: {why}"
        )


def alert_path(rig: RigDefinition, recipe: Recipe, unattended: bool, wall_ns: Callable[[], int]) -> AlertPath:
    """The watch that this run needs: none with people there, or when no channel of the rig wakes anybody."""
    waking = any(channel.priority_at_least >= WAKING for channel in rig.outside.channels)
    watched = unattended and waking and recipe.permit is not None
    return AlertPath(recipe.permit.alerts_down_s if watched and recipe.permit else 0.0, wall_ns)
