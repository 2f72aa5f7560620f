"""Draws the running plant over published curves: ``python -m rigd_sim.bench.published [file.svg]``.

Three pictures: step response of a packed bed (H. Brenner 1962), conversion of a first-order reaction (P. V. Danckwerts
1953), front of a tube (G. I. Taylor 1953 and pure convection). The points are the plant's, run in its own time.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.orders import Action
from rigd.model.rig import (
    Column,
    End,
    Line,
    Liquid,
    LiquidRole,
    Packing,
    Pump,
    RigDefinition,
    Simulation,
    Vessel,
    VesselRole,
)
from rigd_sim.physics.residence import danckwerts, step_closed
from rigd_sim.physics.tubing import pure_convection_step
from rigd_sim.plant import RigPlant

S_NS = 1_000_000_000
FEED_MOL_M3 = 1000.0
Curve = tuple[NDArray[np.float64], NDArray[np.float64]]


def bench_rig(bead_mm: float, tube_m: float, k_per_s: float) -> RigDefinition:
    """One pump into one column (``bead_mm`` > 0) or one tube of 0.5 mm bore, and a flask. Invented."""
    reaction = Reaction("r", {"A": -1, "P": 1}, RateLaw.POWER, ReactionPlace.CATALYST, k_per_s, 25.0, 0.0, {"A": 1})
    chemistry = Chemistry("A to P", (Species("A", "A", 1.0), Species("P", "P", 1.0)), (reaction,), "A", "P")
    packed = (Column("COL", 6.6, 100.0, 40.0, Packing("beads", True, bead_mm, 0.4)),) if bead_mm else ()
    ways = (
        (("L-1", "PU", "COL", 0.5), ("L-2", "COL", "flask", 0.5))
        if bead_mm
        else (("L-1", "PU", "flask", tube_m * 1e3),)
    )
    lines = tuple(Line(name, End(a), End(b), 0.5, length, 100.0) for name, a, b, length in ways)
    return RigDefinition(
        name="published", title="published curves", scan_ns=S_NS, chemistry=chemistry,
        liquids=(Liquid("water", "water", LiquidRole.SOLVENT, "water", {}),),
        vessels=(Vessel("bottle", VesselRole.SUPPLY, 1000, 900, "water"), Vessel("flask", VesselRole.COLLECT, 1000)),
        pumps=(Pump("PU", "", 1, 23.0, 50.0, 0.001, 50.0, 50.0, 40.0, dead_mL=0.0, compliance_mL_bar=1e-3),),
        valves=(), tees=(), columns=packed, cells=(), regulators=(), chillers=(),
        lines=(Line("L-0", End("bottle"), End("PU"), 1.0, 10.0, 40.0), *lines),
        tags=(), interlocks=(), alarms=(), links=(), devices=(), simulation=Simulation(ambient_degC=25.0),
    )  # fmt: skip


def charged(rig: RigDefinition) -> RigPlant:
    """A plant with a full pump of 1 mol/L right before its column or tube."""
    plant = RigPlant(rig, 1)
    contents, layout = plant.contents, plant.layout
    plant.tell("PU", Action.FILL, 50.0)
    plant.advance(62 * S_NS)
    for name in ("PU.syringe1", "PU.out", *(["COL.in"] if rig.columns else [])):
        contents.node_c[layout.node_index[name], 0] = FEED_MOL_M3
    if rig.columns:
        contents.cells[contents.slots(layout.edge_index["L-1"]), 0] = FEED_MOL_M3
    return plant


def front(rig: RigDefinition, part: str, flow_mL_min: float, until: float, step: float = 0.05) -> Curve:
    """F(theta) of what the flask collects."""
    plant = charged(rig)
    tau = plant.layout.edges[plant.layout.edge_index[part]].volume / (flow_mL_min * 1e-6 / 60)
    plant.tell("PU", Action.DELIVER, flow_mL_min)
    start, amounts = plant.now_ns, [0.0]
    for k in range(round(until / step)):
        plant.advance(start + round((k + 1) * step * tau * S_NS))
        plant.settle()
        amounts.append(plant.truth()["amount:flask:A"])
    thetas = np.asarray((np.arange(len(amounts) - 1) + 0.5) * step, dtype=np.float64)
    return thetas, np.diff(amounts) / (flow_mL_min / 60 * step * tau)


def steady(bead_mm: float, damkoehler: float) -> float:
    """A left at the outlet, over the feed, at 1 mL/min."""
    tau = math.pi * 3.3**2 * 100.0 * 0.4e-3 * 60.0
    _, left = front(bench_rig(bead_mm, 0.0, damkoehler / tau), "COL", 1.0, 5.0, 0.25)
    return float(left[-1])


def peclet(bead_mm: float) -> float:
    """Pe of the column at 1 mL/min as the plant has it."""
    plant = charged(bench_rig(bead_mm, 0.0, 0.0))
    plant.tell("PU", Action.DELIVER, 1.0)
    plant.advance(plant.now_ns + 5 * S_NS)
    bed = plant.contents.beds["COL"]
    return float(1e-6 / 60 / plant.contents.exchange[bed.kernel] * bed.cells)


def draw(path: Path) -> None:
    """Make the picture."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(13, 4), layout="constrained")
    bed, conversion, tube = figure.subplots(1, 3)
    for bead_mm in (5.0, 1.0):
        thetas, values = front(bench_rig(bead_mm, 0.0, 0.0), "COL", 1.0, 2.5)
        pe = peclet(bead_mm)
        smooth = np.linspace(0.5, 2.5, 80)
        bed.plot(smooth, [step_closed(pe, t) for t in smooth], label=f"Brenner 1962, Pe {pe:.0f}")
        bed.plot(thetas, values, ".", label="plant")
        das = (0.5, 1.0, 2.0, 3.0)
        conversion.plot(das, [1 - danckwerts(pe, da) for da in das], label=f"Danckwerts 1953, Pe {pe:.0f}")
        conversion.plot(das, [1 - steady(bead_mm, da) for da in das], "o", label="plant")
    for length_m, flow in ((5.0, 0.1), (0.3, 20.0)):
        thetas, values = front(bench_rig(0.0, length_m, 0.0), "L-1", flow, 3.0)
        tube.plot(thetas, values, ".", label=f"plant, {length_m} m at {flow} mL/min")
    smooth = np.linspace(0.02, 3.0, 150)
    group = 48 * math.pi * 1e-9 * 5.0 / (0.1e-6 / 60)
    normal = [0.5 * math.erfc(math.sqrt(group / (4 * t)) * (1 - t)) for t in smooth]
    tube.plot(smooth, normal, label=f"Taylor 1953, uL/K {group:.0f}")
    tube.plot(smooth, [pure_convection_step(t) for t in smooth], label="pure convection")
    titles = ("packed bed, step", "first-order reaction", "tube 0.5 mm, step")
    words = (("t/tau", "F"), ("Da", "conversion"), ("t/tau", "F"))
    for axes, title, (x, y) in zip((bed, conversion, tube), titles, words, strict=True):
        axes.set(title=title, xlabel=x, ylabel=y)
        axes.legend(fontsize=7)
    figure.savefig(path)


def main(arguments: Sequence[str]) -> int:
    """Write the picture and say where."""
    path = Path(arguments[0] if arguments else "plant-and-published.svg")
    draw(path)
    sys.stdout.write(f"{path}\n")
    return 0


if __name__ == "__main__":
    raise SystemExit(main(sys.argv[1:]))
