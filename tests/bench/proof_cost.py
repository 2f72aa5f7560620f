"""What each further fault costs a proof: processor time of the nights that divide from one healthy rehearsal."""

from __future__ import annotations

import os

from bench.start_time import CONFIGS, RIG

from rigd.ports.plant import FaultSpec
from rigd.prove.branch import Job, healthy_night, run_job

RECIPE = CONFIGS / "recipes" / "demo-sweep.toml"
BLOCK = FaultSpec("block", "L-4", magnitude=1.0)


class ProofSeconds:
    """Seconds of processor time of the nights that divide in the first phase, for a number of faults. The healthy
    rehearsal that they come from is not in it: it costs the same whatever their number."""

    def __init__(self) -> None:
        night = healthy_night(RIG, RECIPE, 1)
        self._moments, self._healthy_ns = night.moments[:1], night.length_ns

    def __call__(self, faults: float) -> float:
        """Carry out a job with so many faults of the same kind."""
        before_s = sum(os.times()[2:4])
        nights = run_job(Job(str(RIG), str(RECIPE), 1, (BLOCK,) * int(faults), self._moments, self._healthy_ns))
        assert [night.first_out for night in nights] == ["PRESSURE-HIGH"] * int(faults)
        return sum(os.times()[2:4]) - before_s
