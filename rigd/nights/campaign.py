"""A campaign: its jobs in their order, and the workers that do them, here or on a cluster."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from multiprocessing import get_context
from typing import Any

import numpy as np

from rigd.analysis.designs import base_of, combinations, quantile, unit_points
from rigd.config.varied import Nights
from rigd.model.errors import RigError
from rigd.nights.night import Job, Row, run_night
from rigd.ports.plant import FaultSpec

AHEAD = 3
"""Jobs handed out per worker: enough that none waits, few enough that little is lost on an interrupt."""


def jobs_of(nights: Nights) -> list[Job]:
    """All nights of a campaign; the same file gives the same list, however and wherever it is run."""
    table = numbers_of(nights)
    return [
        Job(
            night=i + 1,
            seed=nights.seed + i,
            files=nights.with_numbers(numbers),
            numbers={varied.what: number for varied, number in zip(nights.varied, numbers, strict=True)},
            faults=_faults(nights, i),
        )
        for i, numbers in enumerate(table)
    ]


def numbers_of(nights: Nights) -> list[tuple[float, ...]]:
    """The varied numbers of each night, one row a night."""
    if nights.design == "all combinations":
        rows = combinations(tuple(varied.numbers for varied in nights.varied))
        return [tuple(float(x) for x in row) for row in rows]
    points = unit_points(nights.design, nights.nights, len(nights.varied), nights.seed)
    return [
        tuple(quantile(v.way, v.numbers, float(u)) for v, u in zip(nights.varied, row, strict=True)) for row in points
    ]


def count_of(nights: Nights) -> int:
    """How many nights there are: a sobol design and all combinations have their own number."""
    if nights.design == "all combinations":
        return int(np.prod([len(varied.numbers) for varied in nights.varied]))
    if nights.design == "sobol" and nights.varied:
        return base_of(nights.nights, len(nights.varied)) * (len(nights.varied) + 2)
    return nights.nights


def _faults(nights: Nights, index: int) -> tuple[FaultSpec, ...]:
    rng = np.random.default_rng((nights.seed, index))
    found = []
    for fault in nights.faults:
        comes, at, size = rng.random(3)
        if comes < fault.chance:
            onset_s = fault.at_s[0] + (fault.at_s[1] - fault.at_s[0]) * at
            magnitude = fault.size[0] + (fault.size[1] - fault.size[0]) * size
            found.append(FaultSpec(fault.kind, fault.target, onset_s=float(onset_s), magnitude=float(magnitude)))
    return tuple(found)


def digest_of(nights: Nights) -> str:
    """What makes two campaigns the same: their files and all that is varied."""
    facts = {
        "nights": count_of(nights), "seed": nights.seed, "design": nights.design, "files": nights.data,
        "varied": [[v.what, v.way, v.unit, v.numbers] for v in nights.varied],
        "faults": [[f.kind, f.target, f.chance, f.at_s, f.size] for f in nights.faults],
    }  # fmt: skip
    return hashlib.sha256(json.dumps(facts, sort_keys=True, default=str).encode()).hexdigest()


def on_this_machine(jobs: Sequence[Job], workers: int = 0) -> Iterator[Row]:
    """Rows as they come, from a pool of processes (0: one for each core)."""
    workers = workers or os.cpu_count() or 1
    with ProcessPoolExecutor(workers, mp_context=get_context("spawn")) as pool:
        waiting: set[Future[Row]] = set()
        left = iter(jobs)
        try:
            while True:
                for job in left:
                    waiting.add(pool.submit(run_night, job))
                    if len(waiting) >= AHEAD * workers:
                        break
                if not waiting:
                    return
                done, waiting = wait(waiting, return_when=FIRST_COMPLETED)
                for future in done:
                    yield future.result()
        finally:
            pool.shutdown(wait=False, cancel_futures=True)


def on_cluster(jobs: Sequence[Job], address: str) -> Iterator[Row]:
    """The same on a dask cluster, whose workers have rigd installed. Raises ``RigError`` without one."""
    try:
        from distributed import Client, as_completed
    except ImportError as error:
        remedy = "install it with: pip install 'rigd[cluster]'"
        raise RigError(f"a cluster needs dask.distributed, which is not installed; {remedy}") from error
    connect: Any = Client
    completed: Any = as_completed
    try:
        client = connect(address, timeout=10)
    except OSError as error:
        raise RigError(
            f"no cluster answers at {address!r}: {error}; start its scheduler, or leave --cluster out"
        ) from error
    try:
        futures = [client.submit(run_night, job, pure=False) for job in jobs]
        for future in completed(futures):
            yield future.result()
            future.release()
    finally:
        client.close()
