"""Puts concrete parts together: the only place that knows them all.

``start_run`` turns ``rigd run`` into the guard of a run, the guard starts ``control_main``, and that builds the live
shell. ``dry_run`` builds the rehearsal.
"""

from __future__ import annotations

import asyncio
import faulthandler
import gc
import json
import logging
import os
import platform
import shutil
import signal
import sys
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import Any, NoReturn

from rigd import __version__
from rigd.adapters import run_folder
from rigd.adapters.build import core_digest
from rigd.adapters.clock import PacedClock, boot_id, suspended_ns, wall_ns
from rigd.adapters.door_server import DoorServer
from rigd.adapters.guard_plan import helper, will_facts, with_folder
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.open_link import open_link
from rigd.adapters.places import SIMULATED, Daemon, announce, door_path, simulated_ports, write_json
from rigd.adapters.plugins import driver_family, plant_maker, simulator_maker
from rigd.adapters.port_lock import lock_ports, unlock
from rigd.config import load_pair
from rigd.logic.program import Program, RunOptions, compile_program
from rigd.logic.run_end import RunEnd
from rigd.logic.scan import CoreState
from rigd.model.devices import LinkSpec
from rigd.model.errors import JournalError, LinkError, RigError
from rigd.model.recipe import Recipe
from rigd.model.rig import RigDefinition
from rigd.ports.driver import Driver
from rigd.ports.plant import EmulatedLine, FaultSpec, Plant
from rigd.report.ending import END_TEXT
from rigd.runtime.alert_path import alert_path
from rigd.runtime.arming import arming_of, is_simulated, run_facts
from rigd.runtime.calibrated import calibrated_drivers, calibrated_rig, calibrations_of, corrections_of
from rigd.runtime.deep import DeepShell
from rigd.runtime.dry import DryOptions, DryResult, DryShell
from rigd.runtime.live import Live, Surroundings
from rigd.runtime.permission import Permission
from rigd.runtime.spectra import cell_readers
from rigd.runtime.wills import last_resorts, last_wills

FIRST_TICKET_S, EARLY_S, LATE_S = 30.0, 0.04, 1.0
"""The guard's window: until the first ticket, then at least and at most between two [wall]."""
JSON_FACTS = ("pace", "simulated", "unattended", "collected", "ports", "calibrations")
PACED_FLOOR_S = 0.5
"""Wall time that a sample may age and a valve may travel in a paced run, whatever the files say (decision 5)."""


@dataclass(frozen=True, slots=True)
class RunSettings:
    """How to run. ``signer``: the person in whose name it starts ("": a simulated rig starts itself, a real one waits).

    ``progress`` is a command that shows progress on stderr, ``after`` one that runs at the end; both get the run folder
    in place of the word ``{folder}``. ``trace`` names links whose bytes are recorded. ``collected`` are points of an
    ``earlier``, stopped run that need not be collected again.
    """

    pace: float = 1.0
    signer: str = ""
    runs: Path = Path("runs")
    collected: tuple[str, ...] = ()
    earlier: str = ""
    unattended: bool = False
    trace: tuple[str, ...] = ()
    progress: tuple[str, ...] = ()
    after: tuple[str, ...] = ()


def start_run(rig_path: Path, recipe_path: Path, settings: RunSettings = RunSettings()) -> NoReturn:
    """Become the guard of a new run. Returns only by raising: ``ConfigError``, ``PluginError``, ``LinkError`` or
    ``RigError``, before anything was opened or moved."""
    plan = prepare_run(rig_path, recipe_path, settings)
    sys.stdout.flush()
    sys.stderr.flush()
    # a signal during the change waits until the guard, and then control, can do what it asks
    signal.pthread_sigmask(signal.SIG_BLOCK, (signal.SIGINT, signal.SIGTERM))
    os.execv(sys.executable, [sys.executable, "-m", "rigd.guard", str(plan)])


def prepare_run(rig_path: Path, recipe_path: Path, settings: RunSettings) -> Path:
    """Check everything, lock the ports, make the run folder; returns the guard's plan. The locks stay with this process
    and are inherited by the guard that it becomes."""
    pair = load_pair(rig_path, recipe_path)
    assert pair.recipe is not None
    rig, recipe = pair.rig, pair.recipe
    drivers = make_drivers(rig)
    arming = run_facts(arming_of(rig_path, rig, recipe, settings.pace), settings.unattended, is_simulated(rig))
    calibrations = calibrations_of(rig_path, rig)
    links = resolve_ports(rig, str(rig_path), settings.pace)
    folder = run_folder.make_run_folder(settings.runs, recipe.name)
    locks: list[int] = []
    try:
        locks = lock_ports((link.port for link in links), rig=rig.name, folder=str(folder), pid=os.getpid())
        run_folder.freeze_files(folder, rig_path, recipe_path)
        door = door_path(rig.name, os.getpid())
        announced = announce(Daemon(os.getpid(), rig.name, folder.name, str(folder), str(door)))
        plan = _plan(rig, recipe, settings, folder, links, drivers, locks)
        meeting = {"door": str(door), "cleanup": [str(announced), str(door)]}
        write_json(folder / "plan.json", {**plan, **arming, **meeting, "calibrations": calibrations})
    except BaseException:
        unlock(locks)
        shutil.rmtree(folder, ignore_errors=True)  # nothing was run
        raise
    for lock in locks:
        os.set_inheritable(lock, True)
    return folder / "plan.json"


def make_drivers(rig: RigDefinition) -> dict[str, Driver]:
    """A driver per device; ``PluginError`` for a missing one, ``ConfigError`` for options that it does not take."""
    return {device.id: driver_family(device.driver).make(device) for device in rig.devices}


def resolve_ports(rig: RigDefinition, rig_path: str, pace: float) -> tuple[LinkSpec, ...]:
    """The links with their real ports. ``LinkError`` when the simulator is needed and not there, ``RigError`` for
    a pace
    other than 1 on real ports."""
    real = [link for link in rig.links if link.port != SIMULATED]
    if pace != 1 and real:
        port = f"link {real[0].id!r} has the real port {real[0].port!r}"
        raise RigError(f"pace {pace:g} needs a simulated rig, but {port}; leave --pace out")
    if len(real) == len(rig.links):
        return rig.links
    served = simulated_ports(rig.name, rig_path, pace)
    missing = [link.id for link in rig.links if link.port == SIMULATED and link.id not in served]
    if missing:
        raise LinkError(f"the simulator serves no link {missing[0]!r}; was it started with another rig file?")
    return tuple(replace(link, port=served[link.id]) if link.port == SIMULATED else link for link in rig.links)


def control_main(plan_path: str) -> int:
    """The control process: run what the plan says, return the exit code. Anything that is not a ``RigError`` goes
    up, with
    no last word to the guard, which then stops the rig."""
    logging.basicConfig(level=logging.INFO, format="%(asctime)s %(name)s %(message)s", stream=sys.stderr)
    logging.getLogger("transitions").setLevel(logging.WARNING)
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    faulthandler.register(signal.SIGUSR1)  # shows in control.log what every thread is doing
    sys.setswitchinterval(0.0005)  # a thread must not hold the loop back for the stock 5 ms
    plan = json.loads(Path(plan_path).read_text(encoding="utf-8"))
    try:
        end = asyncio.run(_control(plan))
    except RigError as error:
        end = RunEnd("refused", 2, f"could not start: {error}")
        Permission(_descriptor("RIGD_TICKET_FD"), wall_ns).say_end(end.exit_code, end.text)
    return end.exit_code


async def _control(plan: dict[str, Any]) -> RunEnd:
    folder = Path(plan["folder"])
    pair = load_pair(folder / run_folder.RIG, folder / run_folder.RECIPE)
    assert pair.recipe is not None
    if (pair.rig.digest, pair.recipe.digest) != (plan["rig_digest"], plan["recipe_digest"]):
        raise RigError(f"the copies in {folder} are not the files that were checked; start again")
    links = tuple(replace(link, port=plan["ports"][link.id]) for link in pair.rig.links)
    corrected = corrections_of(plan["calibrations"])
    program = compile_program(calibrated_rig(pair.rig, corrected), pair.recipe, _run_options(plan))
    clock = PacedClock(plan["pace"])
    journal = SqliteJournal(folder / "run.sqlite", _facts(plan, folder, clock), pair.rig.tags)
    live = Live(
        Surroundings(
            program,
            links,
            calibrated_drivers(make_drivers(pair.rig), pair.rig, corrected),
            open_link,
            journal,
            clock,
            wall_ns,
            suspended_ns,
            signer=plan["signer"],
            alerts=alert_path(pair.rig, pair.recipe, plan["unattended"], wall_ns),
            ticket_fd=_descriptor("RIGD_TICKET_FD"),
            life_fd=_descriptor("RIGD_LIFE_FD"),
            trace_links=frozenset(plan["trace"]),
            handle_signals=True,
        )
    )
    return await _live(live, plan, clock, journal)


async def _live(live: Live, plan: dict[str, Any], clock: PacedClock, journal: SqliteJournal) -> RunEnd:
    names = ("run", "folder", "rig", "recipe", "simulated", "pace", "pid")
    run = {"id" if name == "run" else name: plan[name] for name in names}
    door = DoorServer(
        Path(plan["door"]),
        live.submit,
        lambda: {"run": run, "utc": clock.utc(), "record": journal.head(), **live.loop.snapshot()},
        clock.now_ns,
        live.given.alerts.heard if live.given.alerts else lambda down: None,
    )
    await door.open()
    live.tell, live.refresh = door.tell, door.refresh
    gc.collect()
    gc.freeze()  # what is there now stays: the collector need not look at it during scans
    end = await live.run()
    live.say_end(end)
    for device in live.devices:
        if device.identity is not None:
            journal.note(f"identity.{device.spec.id}", json.dumps(asdict(device.identity)))
    journal.note(END_TEXT, end.text)
    await door.close(end.outcome, end.exit_code)
    try:
        await asyncio.to_thread(journal.close, end.outcome)
    except JournalError:
        logging.getLogger(__name__).exception("the journal was not ended cleanly")
    return end


def _plan(
    rig: RigDefinition,
    recipe: Recipe,
    settings: RunSettings,
    folder: Path,
    links: Sequence[LinkSpec],
    drivers: Mapping[str, Driver],
    locks: Sequence[int],
) -> dict[str, Any]:
    python = [sys.executable, "-m"]
    helpers = []
    if rig.outside.mqtt is not None or rig.outside.channels:
        helpers.append(helper("front", [*python, "rigd.front", str(folder / "plan.json")], shown=False))
    if settings.progress:
        helpers.append(helper("progress", with_folder(settings.progress, folder), shown=True))
    return {
        "run": folder.name,
        "folder": str(folder),
        "pid": os.getpid(),
        "rig": rig.name,
        "recipe": recipe.name,
        "rig_digest": rig.digest,
        "recipe_digest": recipe.digest,
        "simulated": is_simulated(rig),
        "pace": settings.pace,
        "signer": settings.signer,
        "unattended": settings.unattended,
        "collected": list(settings.collected),
        "earlier": settings.earlier,
        "trace": list(settings.trace),
        "ports": {link.id: link.port for link in links},
        "locks": list(locks),
        "control": [*python, "rigd.app", "control"],
        "helpers": helpers,
        "after": with_folder(settings.after, folder),
        "first_s": FIRST_TICKET_S,
        "early_s": EARLY_S,
        "late_s": max(LATE_S, 5e-9 * rig.scan_ns),
        "wills": [will_facts(will, will.device in last_resorts(rig)) for will in last_wills(rig, drivers, links)],
    }


def _run_options(plan: Mapping[str, Any]) -> RunOptions:
    floor_ns = int(PACED_FLOOR_S * plan["pace"] * 1e9) if plan["pace"] != 1 else 0
    permit_ns, overdue = int(plan["permit_s"] * plan["pace"] * 1e9), tuple(plan["overdue"])
    return RunOptions(tuple(plan["collected"]), bool(plan["unattended"]), floor_ns, floor_ns, permit_ns, overdue)


def _facts(plan: Mapping[str, Any], folder: Path, clock: PacedClock) -> dict[str, str]:
    """What the journal holds about the run itself."""
    told = ("run", "rig", "recipe", "rig_digest", "recipe_digest", "signer")
    facts = {name: str(plan[name]) for name in told}
    facts |= {"earlier": plan["earlier"]} if plan["earlier"] else {}
    facts |= {name: json.dumps(plan[name]) for name in JSON_FACTS}
    facts |= run_folder.kept_texts(folder)
    facts["options"] = json.dumps(asdict(_run_options(plan)))
    computer = f"{platform.platform()}, Python {platform.python_version()}"
    started = {"started_utc": clock.utc(), "origin_monotonic_ns": str(clock.origin_ns), "boot_id": boot_id()}
    return {**facts, **started, "version": __version__, "core": core_digest(), "computer": computer}


def _descriptor(name: str) -> int:
    return int(os.environ.get(name, "-1"))


@dataclass(frozen=True, slots=True)
class DryRun:
    """A rehearsal that is over: what was run, on what, and what came out."""

    program: Program
    plant: Plant
    result: DryResult


@dataclass(frozen=True, slots=True)
class DrySettings:
    """``seed`` 0 takes the rig file's; ``faults`` are injected before the start; ``watch`` is called each second;
    ``deep`` runs the live shell over emulated bytes instead of the fast shell."""

    seed: int = 0
    faults: tuple[FaultSpec, ...] = ()
    journal: Path | None = None
    watch: Callable[[int, CoreState], None] | None = None
    options: DryOptions = field(default_factory=DryOptions)
    deep: bool = False


def dry_run(rig_path: Path, recipe_path: Path, settings: DrySettings = DrySettings()) -> DryRun:
    """Rehearse a recipe on the simulated plant in virtual time. Raises ``ConfigError`` or ``PluginError``."""
    pair = load_pair(rig_path, recipe_path)
    assert pair.recipe is not None
    program = compile_program(pair.rig, pair.recipe)
    seed = settings.seed or pair.rig.simulation.seed
    plant = plant_maker().make(pair.rig, seed)
    lines = simulator_maker().lines(pair.rig, plant, 1.0, seed) if settings.deep else {}
    for fault in settings.faults:
        _suffering(fault, pair.rig, plant, lines).inject(fault)
    journal = None
    if settings.journal is not None:
        facts = _dry_facts(program, rig_path, recipe_path)
        journal = SqliteJournal(settings.journal, facts, pair.rig.tags)
    shell: DryShell | DeepShell
    if settings.deep:
        shell = DeepShell(program, plant, lines, make_drivers(pair.rig), journal, settings.watch)
    else:
        shell = DryShell(program, plant, cell_readers(pair.rig, pair.recipe), journal, settings.watch)
    result = shell.run(settings.options)
    if journal is not None:
        journal.note(END_TEXT, result.text)
        journal.close(result.outcome)
    return DryRun(program, plant, result)


def _suffering(
    fault: FaultSpec, rig: RigDefinition, plant: Plant, lines: Mapping[str, EmulatedLine]
) -> Plant | EmulatedLine:
    """Who takes a fault: the plant, or the line of the link or device that a fault of bytes names."""
    if fault.kind in {kind.kind for kind in plant_maker().fault_kinds()}:
        return plant
    link = next((device.link for device in rig.devices if device.id == fault.target), fault.target)
    return lines.get(link, plant)


def _dry_facts(program: Program, rig_path: Path, recipe_path: Path) -> dict[str, str]:
    """What the journal of a rehearsal holds about it: enough to decide it all again."""
    rig, recipe = program.rig, program.recipe
    names = {"rig": rig.name, "recipe": recipe.name, "rig_digest": rig.digest, "recipe_digest": recipe.digest}
    facts = {"simulated": "true", "version": __version__, "core": core_digest()}
    facts["options"] = json.dumps(asdict(program.options))
    return {**names, **facts, **run_folder.frozen_texts(rig_path, recipe_path)}


if __name__ == "__main__":
    sys.exit(control_main(sys.argv[2]))
