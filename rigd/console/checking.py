"""What ``rigd check`` finds out: files, drivers, plan, and response times, as one value."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, replace
from datetime import UTC, datetime
from pathlib import Path

from rigd.adapters.plugins import driver_family, property_library
from rigd.adapters.rig_records import read_records
from rigd.config.calibrating import facts as calibration_facts
from rigd.config.calibrating import in_force
from rigd.config.calibrating import problems as calibration_problems
from rigd.config.load import load_pair
from rigd.config.places import placed
from rigd.console.trouble import problem_facts
from rigd.console.wills_view import wills_facts
from rigd.logic.foresight import foreseen_plan
from rigd.logic.planning import Plan
from rigd.logic.program import compile_program
from rigd.logic.response import Response, largest_flow_mL_min, responses
from rigd.model.calibration import Calibrated
from rigd.model.devices import LastWill
from rigd.model.errors import ConfigError
from rigd.model.problems import Problem, Severity
from rigd.model.recipe import Recipe
from rigd.model.rig import PropertySet, RigDefinition, VesselRole
from rigd.ports.driver import Driver
from rigd.report.cause_effect import LEGEND, matrix
from rigd.report.early_sight import early_sight
from rigd.report.gaps import gaps
from rigd.runtime.wills import last_resorts, last_wills


@dataclass(frozen=True, slots=True)
class Checked:
    """The findings. ``plan`` is ``None`` without a recipe."""

    rig: RigDefinition
    recipe: Recipe | None
    plan: Plan | None
    problems: tuple[Problem, ...]
    responses: tuple[Response, ...]
    flow_max_mL_min: float
    liquids: tuple[PropertySet, ...] = ()
    calibrations: tuple[Calibrated, ...] = ()
    wills: tuple[LastWill, ...] = ()

    @property
    def fit(self) -> bool:
        """No error among the problems."""
        return all(problem.severity is not Severity.ERROR for problem in self.problems)

    def facts(self) -> dict[str, object]:
        """The keys that ``check --json`` promises."""
        return {
            "fit": self.fit,
            "rig": self.rig.name,
            "recipe": self.recipe.name if self.recipe else None,
            "digests": {"rig": self.rig.digest, "recipe": self.recipe.digest if self.recipe else None},
            "problems": [problem_facts(problem) for problem in self.problems],
            **(plan_facts(self.rig, self.plan) if self.plan else {}),
            "properties": [asdict(one) for one in self.liquids],
            "interlocks": [response_facts(response) for response in self.responses],
            "calibrations": calibration_facts(self.calibrations, datetime.now(UTC)),
            "cause_effect": cause_effect_facts(self.rig),
            "last_wills": wills_facts(self.wills, last_resorts(self.rig)),
        }


def check_files(rig_path: Path, recipe_path: Path | None) -> Checked:
    """Load, make the drivers, plan, compare response times. Raises ``ConfigError`` or ``PluginError``."""
    pair = load_pair(rig_path, recipe_path)
    wills = last_wills(pair.rig, _make_drivers(pair.rig), pair.rig.links)
    found = responses(pair.rig, pair.recipe)
    planned = foreseen_plan(compile_program(pair.rig, pair.recipe)) if pair.recipe else None
    severity = Severity.ERROR if pair.recipe else Severity.WARNING
    computed = [*(planned.problems if planned else ())]
    computed += [_too_slow(response, severity) for response in found if not response.fit]
    problems = [*pair.warnings, *placed(computed, rig_path, recipe_path)]
    flow_mL_min = largest_flow_mL_min(pair.rig, pair.recipe)
    sets, more = _properties(pair.rig, str(rig_path))
    calibrated = in_force(pair.rig, read_records(rig_path))
    more = (*more, *_calibration_problems(pair.rig, calibrated, planned))
    return Checked(
        pair.rig, pair.recipe, planned, (*problems, *more), found, flow_mL_min, sets, calibrated, tuple(wills)
    )


def _make_drivers(rig: RigDefinition) -> dict[str, Driver]:
    """Make each driver; ``ConfigError`` with what is wrong with any of them, each problem once."""
    made: dict[str, Driver] = {}
    problems: dict[Problem, None] = {}
    for device in rig.devices:
        try:
            made[device.id] = driver_family(device.driver).make(device)
        except ConfigError as error:
            problems |= dict.fromkeys(error.problems)
    if problems:
        raise ConfigError(tuple(problems))
    return made


def _calibration_problems(rig: RigDefinition, found: tuple[Calibrated, ...], planned: Plan | None) -> list[Problem]:
    """Overdue, or a planned flow out of reach of a pump that gives less than it is told."""
    flows = {
        pump.id: max((phase.flows_mL_min.get(pump.id, 0.0) for phase in planned.phases), default=0.0)
        if planned
        else 0.0
        for pump in rig.pumps
    }
    return calibration_problems(found, datetime.now(UTC), flows, {pump.id: pump.rate_max_mL_min for pump in rig.pumps})


def _properties(rig: RigDefinition, path: str) -> tuple[tuple[PropertySet, ...], tuple[Problem, ...]]:
    """What the simulator takes the liquids for. A real rig runs without it, so an unknown name is a warning."""
    try:
        return tuple(property_library().sets(rig)), ()
    except ConfigError as error:
        return (), tuple(replace(p, file=path, severity=Severity.WARNING) for p in error.problems)


def supplies_mL(rig: RigDefinition) -> dict[str, float]:
    """Per liquid, what its bottles hold before the run."""
    found: dict[str, float] = {}
    for vessel in rig.vessels:
        if vessel.role is VesselRole.SUPPLY and vessel.liquid:
            found[vessel.liquid] = found.get(vessel.liquid, 0.0) + vessel.content_mL
    return found


def plan_facts(rig: RigDefinition, planned: Plan) -> dict[str, object]:
    """The plan for programs."""
    phases = [
        {
            "id": phase.id,
            "label": phase.label,
            "point": phase.point,
            "start_s": phase.start_s,
            "duration_s": phase.duration_s,
            "flow_mL_min": dict(phase.flows_mL_min),
            "drawn_mL": dict(phase.drawn_mL),
            "refills": phase.refills,
        }
        for phase in planned.phases
    ]
    return {
        "duration_s": planned.duration_s,
        "used_mL": dict(planned.used_mL),
        "left_mL": {name: mL - planned.used_mL.get(name, 0.0) for name, mL in supplies_mL(rig).items()},
        "collected_mL": planned.collected_mL,
        "waste_mL": planned.waste_mL,
        "refills": planned.refills,
        "phases": phases,
    }


def response_facts(response: Response) -> Mapping[str, object]:
    """One interlock; ``margin`` is half the process safety time over the response time, fit from 1 up."""
    return {
        "id": response.interlock,
        "stop": response.stop.name.lower(),
        "response_time_s": round(response.budget.total_s, 4),
        "process_safety_time_s": response.safety_s,
        "margin": response.margin,
        "flow_max_mL_min": response.flow_max_mL_min,
    }


def cause_effect_facts(rig: RigDefinition) -> dict[str, object]:
    """The matrix with its legend, and what it leaves open."""
    found = matrix(rig)
    return {
        "columns": found.columns,
        "rows": [asdict(row) for row in found.rows],
        "legend": LEGEND,
        "gaps": [asdict(gap) for gap in gaps(rig)],
        "watched_early": [asdict(one) for one in early_sight(rig)],
    }


def _too_slow(response: Response, severity: Severity) -> Problem:
    """A recipe that an interlock cannot answer in time is not fit to run; a rig alone may still get a slower one."""
    assert response.safety_s is not None
    return Problem(
        "response-slow",
        f"{response.interlock} answers in {response.budget.total_s:.2f} s, but at the largest flow only"
        f" {response.safety_s:.2f} s pass between its limit and the rating; at most half of that may be used",
        f"keep every total flow below {response.flow_max_mL_min:.3g} mL/min, or lower the limit, or poll faster",
        severity=severity,
        key=f"interlocks[{response.interlock}]",
    )
