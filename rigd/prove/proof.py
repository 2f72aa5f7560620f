"""The proof as a whole: which faults, when, on how many workers, and what the nights say together."""

from __future__ import annotations

import math
import os
from collections.abc import Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from multiprocessing import get_context
from pathlib import Path

from rigd.adapters.plugins import plant_maker
from rigd.logic.early.path import trunk_parts
from rigd.logic.flow_path import flow_path
from rigd.model.rig import RigDefinition
from rigd.ports.plant import FaultSpec
from rigd.prove.branch import HealthyNight, Job, Moment, healthy_night, run_job
from rigd.prove.judge import VERDICTS, Night

SIZES: dict[str, tuple[float, ...]] = {
    "block": (0.9, 0.99, 1.0), "clog": (0.2, 1.0, 3.0), "collapse": (2.0, 5.0, 20.0), "leak": (0.02, 0.2, 1.0),
    "burst": (0.3, 1.0, 3.0), "channelling": (1.0, 10.0, 100.0), "backflow": (0.01, 0.05, 0.2),
    "bubble": (0.02, 0.1, 0.5), "outgassing": (0.02, 0.1, 0.5), "small-flask": (0.2, 1.0, 5.0),
    "siphon": (-0.2, 0.1, 0.4), "slip": (0.1, 0.4, 0.9), "wrong-bore": (0.8, 1.05, 1.3), "ripple": (0.2, 0.5, 0.9),
    "backlash": (0.02, 0.1, 0.3), "draws-air": (0.1, 0.4, 1.0), "valve-leaks": (0.02, 0.2, 0.8),
    "valve-slow": (3.0, 8.0, 20.0), "no-cooling": (0.3, 0.7, 1.0), "no-heating": (0.3, 0.7, 1.0),
    "bath-offset": (-5.0, 3.0, 10.0), "offset": (-2.0, 1.0, 5.0), "drift": (-2.0, 1.0, 10.0), "gain": (0.5, 1.2, 2.0),
    "noisy": (3.0, 10.0, 30.0), "spikes": (-5.0, 2.0, 20.0), "out-of-span": (-1.0, 1.0, 1.0),
    "detached": (10.0, 60.0, 300.0), "ir-drift": (0.05, 0.3, 1.0), "ir-film": (0.05, 0.3, 1.0),
    "ir-noise": (3.0, 10.0, 30.0), "ir-shift": (-4.0, 2.0, 8.0), "ir-stray": (0.01, 0.05, 0.2),
    "exotherm": (1.0, 5.0, 20.0), "poisoning": (0.2, 0.6, 0.95), "deactivation": (0.2, 1.0, 5.0),
    "too-active": (1.5, 3.0, 6.0), "room": (-15.0, 8.0, 15.0),
}  # fmt: skip
"""Three magnitudes of each kind that has one, small to large, in its own unit (``rigd faults``)."""


@dataclass(frozen=True, slots=True)
class Settings:
    """``kinds`` to try (all when empty); ``largest_only``: one magnitude instead of three; ``targets_each``: on how
    many parts (0: no faults at all); ``healthy_hours``: at least so many hours are rehearsed without a fault.
    """

    seeds: tuple[int, ...] = (1,)
    workers: int = 0
    kinds: tuple[str, ...] = ()
    largest_only: bool = False
    targets_each: int = 1
    healthy_hours: float = 0.0


@dataclass(frozen=True, slots=True)
class Healthy:
    """The nights without a fault: hours rehearsed, what tripped all the same, and the alarms that sounded."""

    hours: float
    spurious: tuple[str, ...]
    alarms: tuple[str, ...] = ()
    nights: int = 1


def faults_of(rig: RigDefinition, settings: Settings) -> tuple[FaultSpec, ...]:
    """The faults to inject: each kind on ``targets_each`` of its targets, at its magnitudes.

    Parts that lie on the common way of the liquid come first: there is pressure and flow.
    """
    maker, trunk = plant_maker(), frozenset(trunk_parts(rig, flow_path(rig)))
    found: list[FaultSpec] = []
    for kind in maker.fault_kinds():
        if settings.kinds and kind.kind not in settings.kinds:
            continue
        sizes = tuple(dict.fromkeys(SIZES.get(kind.kind, (1.0,))))
        targets = tuple(maker.fault_targets(rig, kind.kind))
        common = tuple(target for target in targets if target in trunk)
        enough = len(common) >= settings.targets_each
        for target in spread(common if enough else targets, settings.targets_each):
            found += [
                FaultSpec(kind.kind, target, magnitude=x) for x in (sizes[-1:] if settings.largest_only else sizes)
            ]
    return tuple(found)


def spread(names: tuple[str, ...], count: int) -> tuple[str, ...]:
    """``count`` of them, evenly over their order.

    >>> spread(("bottle", "pump line", "trunk", "outlet", "waste"), 1)
    ('trunk',)
    """
    count = min(count, len(names))
    return tuple(names[(2 * i + 1) * len(names) // (2 * count)] for i in range(count))


def jobs_of(
    rig: Path, recipe: Path, faults: Sequence[FaultSpec], settings: Settings
) -> tuple[list[Job], Healthy, tuple[Moment, ...]]:
    """Jobs for the workers, and what the healthy nights that they start from were like.

    One job of few faults costs a healthy night of its own, so there are no more jobs than keep the workers busy.
    """
    workers = settings.workers or os.cpu_count() or 1
    jobs: list[Job] = []
    nights: list[HealthyNight] = []
    for seed in settings.seeds:
        night = healthy_night(rig, recipe, seed)
        nights.append(night)
        parts = min(workers * 4, max(workers, len(faults) // 4))
        usual = frozenset(night.alarms)
        jobs += [
            Job(str(rig), str(recipe), seed, tuple(faults[i::parts]), night.moments, night.length_ns, usual)
            for i in range(parts)
            if faults[i::parts]
        ]
    nights += _more_healthy(rig, recipe, nights, settings, workers)
    trips = tuple(trip for night in nights for trip in night.trips)
    alarms = tuple(alarm for night in nights for alarm in night.alarms)
    return jobs, Healthy(_hours(nights), trips, alarms, len(nights)), nights[len(settings.seeds) - 1].moments


def _hours(nights: Sequence[HealthyNight]) -> float:
    return sum(night.length_ns for night in nights) / 3.6e12


def _more_healthy(
    rig: Path, recipe: Path, nights: Sequence[HealthyNight], settings: Settings, workers: int
) -> list[HealthyNight]:
    """As many more healthy nights, of seeds not yet used, as the hours that were asked for need."""
    missing = settings.healthy_hours - _hours(nights)
    if missing <= 0.0:
        return []
    count = math.ceil(missing * len(nights) / _hours(nights))
    first = max(settings.seeds) + 1
    with ProcessPoolExecutor(workers, mp_context=get_context("spawn")) as pool:
        return list(pool.map(healthy_night, *zip(*((rig, recipe, first + i) for i in range(count)), strict=True)))


def nights_of(jobs: Sequence[Job], workers: int = 0) -> Iterator[Night]:
    """All nights as they come."""
    with ProcessPoolExecutor(workers or os.cpu_count() or 1, mp_context=get_context("spawn")) as pool:
        for future in as_completed([pool.submit(run_job, job) for job in jobs]):
            yield from future.result()


def bound(failures: int, nights: int) -> float:
    """Upper 95 % limit of the chance of a miss per night, 1 - 0.05^(1/n) for none of n (about 3/n); NaN with failures.

    >>> round(bound(0, 1000), 4), round(3 / 1000, 4)
    (0.003, 0.003)
    """
    if failures:
        from rigd.analysis.influence import chance

        return chance(failures, nights).high
    return float(1.0 - 0.05 ** (1.0 / nights)) if nights else 1.0


def counted(nights: Sequence[Night]) -> dict[str, int]:
    """How many of each verdict."""
    return {verdict: sum(night.verdict == verdict for night in nights) for verdict in VERDICTS}
