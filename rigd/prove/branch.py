"""One rehearsal, many faults: at each moment the process divides, and the child goes on with a fault in its plant.

The healthy part before the moment is computed once for all faults of a worker. A child tells its night as one row
through a pipe and ends at once. (Division needs a system that can fork: Linux and its kin.)
"""

from __future__ import annotations

import os
import pickle
import traceback
from collections.abc import Callable
from dataclasses import dataclass, field
from multiprocessing import parent_process
from pathlib import Path

from rigd.adapters.plugins import plant_maker
from rigd.config import load_pair
from rigd.logic.program import compile_program
from rigd.model.events import EventKind
from rigd.model.orders import Verb
from rigd.ports.plant import FaultSpec
from rigd.prove.judge import Night, announced, night_of
from rigd.prove.witness import Witness
from rigd.runtime.dry import DryOptions, DryShell, Visit
from rigd.runtime.spectra import cell_readers

SPARE_NS = 1_200_000_000_000
HELD_NS = 60_000_000_000
LINGER_NS = 6_000_000_000


@dataclass(frozen=True, slots=True)
class Moment:
    """When faults come: a phase and its time."""

    phase: str
    t_ns: int


@dataclass(frozen=True, slots=True)
class Job:
    """What one worker does: one seed, some faults (onset is filled in), all moments.

    ``usual`` are the alarms of the healthy night, which tell nothing of a fault.
    """

    rig: str
    recipe: str
    seed: int
    faults: tuple[FaultSpec, ...]
    moments: tuple[Moment, ...]
    healthy_ns: int
    usual: frozenset[str] = frozenset()


@dataclass(slots=True)
class _Branch:
    """What this process knows of where it is: in a child, its fault and where to tell."""

    fault: FaultSpec | None = None
    phase: str = ""
    onset_ns: int = 0
    pipe: int = -1
    nights: list[Night] = field(default_factory=list)


def run_job(job: Job) -> list[Night]:
    """All nights of a job."""
    pair = load_pair(job.rig, job.recipe)
    assert pair.recipe is not None
    program = compile_program(pair.rig, pair.recipe)
    plant = plant_maker().make(pair.rig, job.seed)
    here, witness = _Branch(), Witness(program, plant)
    visits = tuple(Visit(m.t_ns, _dividing(here, job, m, witness)) for m in job.moments)
    options = DryOptions(
        limit_ns=job.healthy_ns + SPARE_NS,
        linger_ns=LINGER_NS,
        held_ns=HELD_NS,
        visits=visits,
        afterwards=(Verb.START,),
    )
    try:
        result = DryShell(program, plant, cell_readers(pair.rig, pair.recipe), watch=witness.look).run(options)
        if here.fault is None:
            return here.nights
        hazards = next(kind.hazards for kind in plant_maker().fault_kinds() if kind.kind == here.fault.kind)
        at = (here.phase, here.onset_ns, job.seed)
        _tell(here.pipe, night_of(witness, result, here.fault, hazards, at, job.usual))
    except BaseException:
        if here.fault is None:
            raise
        _tell(here.pipe, traceback.format_exc())
    os._exit(0)


def _dividing(here: _Branch, job: Job, moment: Moment, witness: Witness) -> Callable[[int], None]:
    def divide(now_ns: int) -> None:
        if here.fault is not None:
            return
        for fault in job.faults:
            _end_if_alone()
            if _child(here, fault, moment, now_ns):
                witness.begin(now_ns)
                spec = FaultSpec(fault.kind, fault.target, onset_s=now_ns / 1e9, magnitude=fault.magnitude)
                witness.plant.inject(spec)
                return

    return divide


def _end_if_alone() -> None:
    """A worker whose proof was killed has nobody to tell: it ends, and does not keep the machine busy."""
    parent = parent_process()
    if parent is not None and not parent.is_alive():
        os._exit(1)


def _child(here: _Branch, fault: FaultSpec, moment: Moment, now_ns: int) -> bool:
    """True in the child; the parent waits for what it tells."""
    reader, writer = os.pipe()
    pid = os.fork()
    if pid == 0:
        os.close(reader)
        here.fault, here.phase, here.onset_ns, here.pipe = fault, moment.phase, now_ns, writer
        return True
    os.close(writer)
    with os.fdopen(reader, "rb") as pipe:
        told = pipe.read()
    os.waitpid(pid, 0)
    answer = pickle.loads(told) if told else "the process died without a word"
    here.nights.append(answer if isinstance(answer, Night) else Night.broken(fault, moment.phase, str(answer)))
    return False


def _tell(pipe: int, answer: object) -> None:
    with os.fdopen(pipe, "wb") as file:
        file.write(pickle.dumps(answer))


@dataclass(frozen=True, slots=True)
class HealthyNight:
    """A night without a fault: a moment well inside each phase, its length, trips (there should be none) and alarms."""

    moments: tuple[Moment, ...]
    length_ns: int
    trips: tuple[str, ...]
    alarms: tuple[str, ...]


def healthy_night(rig: Path, recipe: Path, seed: int) -> HealthyNight:
    """Rehearse one."""
    from rigd.app import DrySettings, dry_run

    result = dry_run(rig, recipe, DrySettings(seed)).result
    starts = [e for e in result.events if e.kind is EventKind.PHASE and not e.fields.get("step")]
    ends = [event.t_ns for event in starts[1:]] + [result.end_ns]
    moments = [
        Moment(event.subject, event.t_ns + min((end - event.t_ns) // 2, 60_000_000_000))
        for event, end in zip(starts, ends, strict=True)
        if end - event.t_ns > 4_000_000_000
    ]
    trips = tuple(event.subject for event in result.events if event.kind is EventKind.TRIP)
    if not trips and result.outcome != "done":
        trips = (f"not done: {result.text}",)
    return HealthyNight(tuple(moments), result.end_ns, trips, tuple(announced(result.events)))
