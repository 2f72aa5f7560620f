"""One night: its files are written with its numbers, rehearsed, and told as one flat row. Any process can do it."""

from __future__ import annotations

import tempfile
import time
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import tomli_w

from rigd.app import DryRun, DrySettings, dry_run
from rigd.config.load import load_pair
from rigd.logic import scan
from rigd.logic.planning import plan
from rigd.logic.program import compile_program
from rigd.model.errors import ConfigError
from rigd.model.events import EventKind
from rigd.model.rig import Tag, VesselRole
from rigd.ports.plant import FaultSpec
from rigd.runtime.dry import DryOptions

PATIENCE, SPARE_S = 3.0, 3600.0
"""A night that takes this many times its plan, and an hour, waits for somebody who is not there: it is ended."""
Row = dict[str, Any]


@dataclass(frozen=True, slots=True)
class Job:
    """What a worker needs: the values of the three files, the night's number, seed, varied numbers and faults."""

    night: int
    seed: int
    files: Mapping[str, Mapping[str, Any]]
    numbers: Mapping[str, float]
    faults: tuple[FaultSpec, ...] = ()


def run_night(job: Job) -> Row:
    """Rehearse one night. Files that do not fit together are a result too: outcome "refused", with the reason."""
    began = time.perf_counter()
    row: Row = {"night": job.night, "seed": job.seed, **{f"vary.{what}": value for what, value in job.numbers.items()}}
    row["faults"] = ", ".join(f"{f.kind}@{f.target} {f.onset_s:.0f} s {f.magnitude:.3g}" for f in job.faults)
    with tempfile.TemporaryDirectory(prefix="rigd-night-") as folder:
        rig, recipe = write_files(Path(folder), job.files)
        try:
            pair = load_pair(rig, recipe)
            assert pair.recipe is not None
            planned_s = plan(compile_program(pair.rig, pair.recipe)).duration_s
            options = DryOptions(limit_ns=int((PATIENCE * planned_s + SPARE_S) * 1e9))
            done = dry_run(rig, recipe, DrySettings(job.seed, job.faults, options=options))
        except ConfigError as error:
            problem = error.problems[0]
            return {**row, "outcome": "refused", "text": f"{problem.key}: {problem.message}", "first_out": ""}
    return {**row, **_told(done), "wall_s": time.perf_counter() - began}


def write_files(folder: Path, files: Mapping[str, Mapping[str, Any]]) -> tuple[Path, Path]:
    """Write rig, chemistry and recipe into a folder; paths of rig and recipe."""
    rig, recipe, chemistry = folder / "rig.toml", folder / "recipe.toml", folder / "chemistry.toml"
    chemistry.write_text(tomli_w.dumps(files["chemistry"]), encoding="utf-8")
    rig.write_text(tomli_w.dumps({**files["rig"], "chemistry": chemistry.name}), encoding="utf-8")
    recipe.write_text(tomli_w.dumps(files["recipe"]), encoding="utf-8")
    return rig, recipe


def _told(done: DryRun) -> Row:
    result, program = done.result, done.program
    trips = [event.subject for event in result.events if event.kind is EventKind.TRIP]
    shown = scan.snapshot(program, result.state, result.end_ns)
    ledger = shown.get("used_mL")
    used = {str(name): float(mL) for name, mL in ledger.items()} if isinstance(ledger, dict) else {}
    row: Row = {
        "outcome": result.outcome,
        "text": result.text,
        "first_out": trips[0] if trips else "",
        "duration_s": result.end_ns / 1e9,
        "digest": result.digest,
        **_points(done),
        **{f"peak.{tag.id}": result.peak[tag.id] for tag in program.rig.tags if _is_limited(tag, result.peak)},
    }
    for liquid, mL in used.items():
        held = [v.content_mL for v in program.rig.vessels if v.liquid == liquid and v.role is VesselRole.SUPPLY]
        row[f"used_mL.{liquid}"] = mL
        row[f"left_mL.{liquid}"] = sum(held) - mL
    return row


def _is_limited(tag: Tag, peak: Mapping[str, float]) -> bool:
    return tag.id in peak and tag.measures in ("pressure", "temperature")


def _points(done: DryRun) -> Row:
    from rigd.report.points import point_rows

    points = point_rows(tuple(done.result.events), {}, done.program.rig, done.program.recipe)
    row: Row = {
        "points": len(done.program.recipe.points) if done.program.recipe else 0,
        "collected": sum(point.collected_mL > 0 for point in points),
        "settled": sum(bool(point.settled) for point in points),
    }
    for point in points:
        row[f"conversion.{point.id}"] = point.conversion
        row[f"settle_s.{point.id}"] = point.settle_s
    return row
