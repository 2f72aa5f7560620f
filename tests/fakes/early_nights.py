"""Dry runs for the early rules, in a form that other processes can be asked for: files with one thing changed."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from rigd.app import DrySettings, dry_run
from rigd.logic.early.resistance import FAR_S
from rigd.logic.scan import CoreState
from rigd.model.events import EventKind
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

CONFIGS = Path(__file__).parents[2] / "configs"
EARLY = ("CLOG-", "OPEN-", "SOON-", "GAS-", "STIFF-", "SHORT-", "HEAT-")
LONGEST_NS = 3 * 3_600_000_000_000


@dataclass(frozen=True)
class Night:
    """What to run. ``edits`` are regular expressions and what to put there, for the rig and for the recipe."""

    rig: str = "two-pump-column"
    recipe: str = "demo-sweep"
    seed: int = 1
    fault: tuple[str, str, float, float] | None = None
    rig_edits: tuple[tuple[str, str], ...] = ()
    recipe_edits: tuple[tuple[str, str], ...] = ()
    hours: float = 3.0


@dataclass(frozen=True)
class Morning:
    """What came out: outcome, early alarms and trips as (id, seconds), and (seconds, resistance, seconds left)."""

    outcome: str
    alarms: tuple[tuple[str, float], ...]
    texts: tuple[str, ...]
    trips: tuple[tuple[str, float], ...]
    course: tuple[tuple[float, float, float], ...]
    failed: bool

    def first(self, name: str) -> float | None:
        """When an alarm or trip came first [s]."""
        return next((at_s for found, at_s in (*self.alarms, *self.trips) if found == name), None)


STEADY = (
    (r"total_flow = \{ from[^}]*\}", 'total_flow = ["2 mL/min"]'),
    (r"(?m)^volumes = 2.5\nvolumes_max = 6", "volumes = 30\nvolumes_max = 32"),
)
"""One long point at one flow, so that it is known exactly when a clog reaches the limit."""


def night(folder: str, asked: Night) -> Morning:
    """Run it in ``folder``."""
    rig = _edited(Path(folder), CONFIGS / "rigs" / f"{asked.rig}.toml", asked.rig_edits)
    recipe = _edited(Path(folder), CONFIGS / "recipes" / f"{asked.recipe}.toml", asked.recipe_edits)
    course: list[tuple[float, float, float]] = []

    def watch(now_ns: int, state: CoreState) -> None:
        samples = state.protect.signals.samples
        ratios = [samples[tag].value for tag in ("PT-1.resistance", "PT-2.resistance") if tag in samples]
        lefts = [samples[tag].value for tag in ("PT-1.time-left", "PT-2.time-left") if tag in samples]
        if ratios:
            course.append((now_ns / 1e9, max(ratios), min(lefts, default=FAR_S)))

    faults = (
        () if asked.fault is None else (FaultSpec(*asked.fault[:2], onset_s=asked.fault[2], magnitude=asked.fault[3]),)
    )
    options = DryOptions(limit_ns=int(asked.hours * 3.6e12))
    result = dry_run(rig, recipe, DrySettings(seed=asked.seed, faults=faults, watch=watch, options=options)).result
    events = result.events
    told = [
        e
        for e in events
        if e.kind is EventKind.ALARM and e.subject.startswith(EARLY) and "unack" in str(e.fields["state"])
    ]
    return Morning(
        result.outcome,
        tuple((e.subject, e.t_ns / 1e9) for e in told),
        tuple(e.text for e in told),
        tuple((e.subject, e.t_ns / 1e9) for e in events if e.kind is EventKind.TRIP),
        tuple(course),
        any(e.kind is EventKind.FAULT and e.subject == "early" for e in events),
    )


def _edited(folder: Path, path: Path, edits: tuple[tuple[str, str], ...]) -> Path:
    if not edits:
        return path
    text = path.read_text(encoding="utf-8").replace('"../', f'"{CONFIGS}/')
    for old, new in edits:
        text, count = re.subn(old, new, text)
        assert count, old
    number = len(list(folder.iterdir()))
    made = folder / f"{number}-{path.name}"
    made.write_text(text, encoding="utf-8")
    return made
