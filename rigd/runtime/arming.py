"""The arming of one rig and recipe on this computer: files, plan and record put together for ``rigd.config.arming``."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

from rigd.adapters.places import SIMULATED
from rigd.adapters.rig_records import read_records
from rigd.config.arming import Arming, arming, as_problem
from rigd.logic.planning import plan
from rigd.logic.program import compile_program
from rigd.model.errors import ConfigError
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition


def is_simulated(rig: RigDefinition) -> bool:
    """True when every link is served by the simulator."""
    return all(link.port == SIMULATED for link in rig.links)


def arming_of(rig_path: Path, rig: RigDefinition, recipe: Recipe, pace: float = 1.0) -> Arming:
    """What stands in the way of an unattended run now. ``JournalError`` when the rig's record was tampered with."""
    duration_s = plan(compile_program(rig, recipe)).duration_s / pace
    now = datetime.now(UTC)
    return arming(rig, recipe, read_records(rig_path), now, duration_s=duration_s, simulated=is_simulated(rig))


def run_facts(found: Arming, unattended: bool, simulated: bool) -> dict[str, object]:
    """What the run must know of it. ``ConfigError`` with all that is missing when nobody will be there."""
    if unattended and not found.armed:
        raise ConfigError(tuple(as_problem(one) for one in found.missing))
    return {"permit_s": found.left_s if unattended else 0.0, "overdue": [] if simulated else list(found.overdue)}
