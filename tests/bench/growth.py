"""Cost against size, as the exponent of a power law fitted over two decades: 1 is a straight line.

Each size is measured in rounds, all sizes in turn, and the quickest round counts: what other programs take from the
processor only ever adds. A fixed cost makes an exponent smaller, so the local one between the two largest sizes stands
in the note.
"""

from __future__ import annotations

import tempfile
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import replace
from pathlib import Path

from bench.cost_of_journal import journal_seconds
from bench.cost_of_scan import measure_scans
from bench.figures import Figure, Scale, Target, exponent
from bench.plant_cost import step_costs
from bench.proof_cost import ProofSeconds
from bench.start_time import CONFIGS, RIG

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.plugins import plant_maker
from rigd.config import load_pair
from rigd.logic.program import compile_program
from rigd.runtime.dry import DryOptions, DryShell
from rigd.runtime.spectra import cell_readers

EXPONENT_MAX = 1.05
S = 1_000_000_000


def growth_figures(scale: Scale) -> Iterator[Figure]:
    """Tags, cells, hours, rows and faults."""
    yield _growth("tags", "scan against tags", _sizes(scale, 10, 1000), _scan_us, scale.pick(1, 3, 7), "us")
    yield _growth("cells", "plant step against cells", _sizes(scale, 100, 10_000), _plant_us, scale.pick(1, 3, 7), "us")
    longest_h = (0.05, 2.0, 20.0)[scale]
    hours = [longest_h / 100, longest_h / 10, longest_h] if scale else [longest_h / 5, longest_h]
    yield _growth("hours", "dry run against hours", hours, DrySeconds(), scale.pick(1, 1, 2), "s")
    yield _growth("rows", "reading a journal against its scans", _sizes(scale, 100, 10_000), _read_ms, 3, "ms")
    faults = _sizes(scale, 2, 200) if scale else (2, 8)
    yield _growth("faults", "proof against number of faults", faults, ProofSeconds(), 1, "s")


def _sizes(scale: Scale, least: int, most: int) -> Sequence[int]:
    """Five sizes over two decades; two neighbours in a quick run."""
    sizes = [least, round(least * 10**0.5), least * 10, round(least * 10**1.5), most]
    return sizes if scale else sizes[1:3]


def _growth(
    name: str, what: str, sizes: Sequence[float], cost: Callable[[float], float], rounds: int, unit: str
) -> Figure:
    costs = {size: float("inf") for size in sizes}
    for _ in range(rounds):
        for size in sizes:
            costs[size] = min(costs[size], cost(size))
    return Figure(
        f"growth.{name}",
        what,
        "",
        exponent(sizes, list(costs.values())),
        target=Target(value_max=EXPONENT_MAX),
        note=f"exponent, {sizes[0]:g} to {sizes[-1]:g}; {_last(costs):.2f} between the two largest",
        detail={"unit": unit, "costs": {f"{size:g}": value for size, value in costs.items()}},
    )


def _last(costs: Mapping[float, float]) -> float:
    sizes = list(costs)[-2:]
    return exponent(sizes, [costs[size] for size in sizes])


def _scan_us(tags: float) -> float:
    return min(measure_scans(int(tags), 100).whole)


def _plant_us(cells: float) -> float:
    return min(step_costs(int(cells), 20, 3)[0])


class DrySeconds:
    """CPU seconds of the first hours of a night whose points are repeated until it is long enough."""

    def __init__(self) -> None:
        pair = load_pair(RIG, CONFIGS / "recipes" / "overnight-sweep.toml")
        assert pair.recipe is not None
        points = pair.recipe.points
        many = tuple(replace(point, id=f"{point.id}-{turn}") for turn in range(10) for point in points)
        self._rig = replace(pair.rig, vessels=tuple(_endless(vessel) for vessel in pair.rig.vessels))
        self._program = compile_program(self._rig, replace(pair.recipe, points=many))

    def __call__(self, hours: float) -> float:
        """Rehearse this long."""
        plant = plant_maker().make(self._rig, 1)
        shell = DryShell(self._program, plant, cell_readers(self._rig))
        started_s = time.process_time()
        result = shell.run(DryOptions(limit_ns=round(hours * 3600 * S)))
        took_s = time.process_time() - started_s
        assert result.end_ns >= hours * 3600 * S, f"the run ended after {result.end_ns / S:.0f} s: {result.text}"
        return took_s


def _endless(vessel):  # type: ignore[no-untyped-def]
    return replace(vessel, capacity_mL=1e5, content_mL=5e4 if vessel.content_mL else 0.0)


def _read_ms(scans: float) -> float:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "run.sqlite"
        journal_seconds(path, int(scans))
        started_s = time.process_time()
        with JournalReader(path) as journal:
            assert sum(1 for _ in journal.scans()) == scans
        return (time.process_time() - started_s) * 1e3
