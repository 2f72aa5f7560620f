"""Cost of one second of the plant: 300 cells, 6 species, 2 reactions.

The floor is the same arithmetic as one compiled loop: the kernels that one second calls, with the arguments that it
gives them, called again and again without any Python in between.
"""

from __future__ import annotations

import inspect
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any
from unittest.mock import patch

import numpy as np
from bench.figures import Figure, Scale, Target, median
from fakes.sim_rigs import esterification, two_pump_rig

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import RigDefinition
from rigd_sim.physics.compiled import compiled
from rigd_sim.physics.network import advance_pressures
from rigd_sim.physics.transport import MOVED, transport_step
from rigd_sim.physics.warmth import heat_step
from rigd_sim.plant import contents, flows, rig_plant, thermal
from rigd_sim.plant.layout import Layout, build_layout
from rigd_sim.plant.rig_plant import RigPlant

S = 1_000_000_000
BED_SHARE = 0.35
STROKE_mL = 50.0
Call = tuple[Any, ...]


@compiled
def one_loop(n, pending, moved, pressures, transport, heat):  # type: ignore[no-untyped-def]
    """The floor: ``n`` seconds of pressures, transport with reactions, and heat of bed and tubes. ``pending`` is the
    row that one step fills and the next one empties; ``moved`` is what a second moves."""
    for _ in range(n):
        advance_pressures(*pressures)
        pending[:] = moved
        transport_step(*transport)
        heat_step(*heat)


def plant_figures(scale: Scale) -> Iterator[Figure]:
    """One second in the middle of a run."""
    seconds, rounds = scale.pick(3, 60, 120), scale.pick(1, 7, 15)
    plant_us, floor_us = step_costs(300, seconds, rounds)
    yield Figure(
        "plant",
        "plant, 1 s: 300 cells, 6 species, 2 reactions",
        "us",
        median(plant_us),
        median(floor_us),
        "same kernels, one compiled loop",
        Target(ratio_max=2),
        f"CPU time; median of {rounds} rounds of {seconds} s",
    )


def step_costs(cells: int, seconds: int, rounds: int, flow_mL_min: float = 0.5) -> tuple[list[float], list[float]]:
    """CPU time per second of plant and per turn of the floor [us], in turn."""
    plant = running_plant(bench_rig(), cells, flow_mL_min)
    second = recorded_second(plant)
    second.run(1)  # compiles
    plant_us, floor_us = [], []
    for _ in range(rounds):
        plant_us.append(_cpu_us(lambda: _advance(plant, seconds)) / seconds)
        floor_us.append(_cpu_us(lambda: second.run(seconds)) / seconds)
    return plant_us, floor_us


def bench_rig() -> RigDefinition:
    """Two pumps with syringes that last, one column; six species and two reactions on the packing. Invented."""
    chemistry = esterification()
    second = Reaction(
        "dehydration", {"ethanol": -2, "ether": 1, "water": 1}, RateLaw.POWER, ReactionPlace.CATALYST, 1e-5, 60.0, 90.0,
        {"ethanol": 2}, heat_kJ_mol=-12.0,
    )  # fmt: skip
    more = (Species("ether", "diethyl ether", 74.12), Species("tracer", "tracer", 100.0))
    six = Chemistry("six species", (*chemistry.species, *more), (*chemistry.reactions, second), "acid", "ester")
    rig = two_pump_rig(six)
    return replace(rig, pumps=tuple(replace(pump, stroke_mL=STROKE_mL) for pump in rig.pumps))


def running_plant(rig: RigDefinition, cells: int, flow_mL_min: float) -> RigPlant:
    """A plant of about ``cells`` cells whose pumps deliver reagent into the warm column."""
    with patch.object(rig_plant, "build_layout", lambda of: with_cells(build_layout(of), cells)):
        plant = RigPlant(rig, 1)
    assert int(plant.contents.cell_count.sum()) == cells
    tell: Callable[[str, Action, float], str] = plant.tell
    for valve, position in (("V-A", 1.0), ("V-B", 1.0)):
        assert not tell(valve, Action.MOVE, position)
    plant.advance(3 * S)  # a pump that draws from a valve on its way draws vapour
    for pump in ("PU-A", "PU-B"):
        assert not tell(pump, Action.FILL, STROKE_mL)
    tell("CH", Action.SET_TEMPERATURE, 60.0)
    tell("CH", Action.CIRCULATE, 1.0)
    plant.advance(400 * S)
    for pump in ("PU-A", "PU-B"):
        assert not tell(pump, Action.SWAP, 0.0)
        assert not tell(pump, Action.DELIVER, flow_mL_min)
    plant.advance(500 * S)
    assert plant.contents.gas_by_node([]) is None
    return plant


def with_cells(layout: Layout, cells: int) -> Layout:
    """The same network with ``cells`` in all, rings counted: about ``BED_SHARE`` in the column, the rest in lines."""
    lines = [edge for edge in layout.edges if edge.kind == "line"]
    (bed,) = (edge for edge in layout.edges if edge.kind == "column")
    each = max(1, round((1 - BED_SHARE) * cells / sum(line.rings for line in lines)))
    for line in lines:
        line.cells = each
    bed.cells = cells - sum(line.cells * line.rings for line in lines)
    return layout


@dataclass
class Second:
    """What one second of the plant gave to its kernels; arrays are copies and go on living in ``run``."""

    pending: Any
    moved: Any
    pressures: Call
    transport: Call
    heat: Call

    def run(self, seconds: int) -> None:
        """The floor."""
        one_loop(seconds, self.pending, self.moved, self.pressures, self.transport, self.heat)


def recorded_second(plant: RigPlant) -> Second:
    """One second of a running plant, which must call each kernel once."""
    calls: dict[str, list[Call]] = {"pressures": [], "transport": [], "heat": []}
    copies: dict[int, Any] = {}

    def noted(name: str, kernel: Callable[..., Any]) -> Callable[..., Any]:
        def call(*arguments: Any) -> Any:
            calls[name].append(tuple(_copied(argument, copies) for argument in arguments))
            return kernel(*arguments)

        return call

    with (
        patch.object(flows, "advance_pressures", noted("pressures", advance_pressures)),
        patch.object(contents, "transport_step", noted("transport", transport_step)),
        patch.object(thermal, "heat_step", noted("heat", heat_step)),
    ):
        _advance(plant, 1)
    counts = {name: len(found) for name, found in calls.items()}
    assert counts == {"pressures": 1, "transport": 1, "heat": 1}, counts
    pressures, transport = calls["pressures"][0], calls["transport"][0]
    pending = transport[_place(transport_step, "edge")][MOVED]
    return Second(pending, pending.copy(), pressures, transport, calls["heat"][0])


def _place(kernel: Any, argument: str) -> int:
    """Where an argument of a kernel stands."""
    return list(inspect.signature(kernel.py_func).parameters).index(argument)


def _copied(argument: Any, copies: dict[int, Any]) -> Any:
    """A copy of an array, the same one for the same array."""
    if not isinstance(argument, np.ndarray):
        return argument
    if id(argument) not in copies:
        copies[id(argument)] = argument.copy()
    return copies[id(argument)]


def _advance(plant: RigPlant, seconds: int) -> None:
    for _ in range(seconds):
        plant.advance(plant.now_ns + S)


def _cpu_us(act: Callable[[], None]) -> float:
    started_s = time.process_time()
    act()
    return (time.process_time() - started_s) * 1e6
