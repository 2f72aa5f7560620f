"""The early rules on an invented path with exact pressures: flows, temperatures and the syringes as told."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path

from rigd.config import load_pair
from rigd.logic.early import watch
from rigd.logic.early.path import tube
from rigd.logic.early.viscosity import VISCOSITY_MPA_S, viscosity_mPa_s
from rigd.logic.program import Program, compile_program
from rigd.logic.protect import ledger, signals
from rigd.logic.protect.ledger import Content, Count, Source
from rigd.model.events import Event
from rigd.model.samples import Sample

CONFIGS = Path(__file__).parents[2] / "configs"
STEP_NS = 1_000_000_000
NOISE_BAR = (0.004, -0.006, 0.002, 0.005, -0.005)


@cache
def example() -> Program:
    """The two-pump example rig with its short recipe."""
    pair = load_pair(CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml")
    assert pair.recipe is not None
    return compile_program(pair.rig, pair.recipe)


@dataclass
class EarlyBench:
    """A rig whose true path resists ``bed`` bar per mPa s and mL/min in the bed besides its tubes, all in seconds."""

    bed: float = 0.3
    clog: float = 1.0
    leak_mL_min: float = 0.0
    bed_degC: float = 22.0
    mu: float = 1.0
    total_mL_min: float = 2.0
    content: Content = Content.SOLVENT
    outlet: str = "waste"
    program: Program = field(default_factory=example)
    now_ns: int = 0
    delivered_mL: float = 0.0
    values: dict[str, list[float]] = field(default_factory=dict)
    events: list[Event] = field(default_factory=list)
    extra: dict[str, float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.state = watch.initial(self.program.early, 0)
        self.image: dict[str, Sample] = {}
        self.rings: dict[str, tuple[Sample, ...]] = {}

    def pressures(self) -> dict[str, float]:
        """PT-1 and PT-2 without noise."""
        ethanol = VISCOSITY_MPA_S["ethanol"]
        room, warm = viscosity_mPa_s(ethanol, 22.0) * self.mu, viscosity_mPa_s(ethanol, self.bed_degC) * self.mu
        flow = self.total_mL_min - self.leak_mL_min
        lines = tube(0.5, 300.0) * room + tube(0.5, 250.0) * room
        behind = 2.0 + tube(0.5, 450.0) * room * flow
        return {"PT-2": behind, "PT-1": behind + (lines + self.bed * self.clog * warm) * flow}

    def run(self, seconds: int) -> None:
        """So many seconds with a sample of everything each second."""
        for _ in range(seconds):
            self.now_ns += STEP_NS
            self.delivered_mL += self.total_mL_min / 60.0
            self.step()

    def step(self) -> None:
        """One scan."""
        noise = NOISE_BAR[self.now_ns // STEP_NS % len(NOISE_BAR)]
        read = {tag: bar + noise for tag, bar in self.pressures().items()}
        read |= {"TT-1": self.bed_degC, "TT-2": self.bed_degC, "CH.bath": self.bed_degC}
        read |= {"PU-A.flow": self.total_mL_min / 2, "PU-B.flow": self.total_mL_min / 2, **self.extra}
        changed = {tag: Sample(tag, value, self.now_ns) for tag, value in read.items() if math.isfinite(value)}
        self.image |= changed
        for tag, sample in changed.items():
            self.rings[tag] = (*self.rings.get(tag, ())[-19:], sample)
        seen = signals.Signals(self.image, 0, 0, rings=self.rings)
        shown: dict[str, Sample] = {}
        self.state, learned = watch.update(self.program, self.state, seen, self.ledger(), changed, shown, self.now_ns)
        self.events += learned
        self.image |= shown
        for tag, sample in shown.items():
            self.values.setdefault(tag, []).append(sample.value)

    def ledger(self) -> ledger.Ledger:
        """What protect counts."""
        half = self.delivered_mL / 2
        counts = {pump: Count(1, 1, half, half, self.content, Content.EMPTY) for pump in ("PU-A", "PU-B")}
        position = "reagent" if self.content is Content.REAGENT else "solvent"
        lines = {pump: self.program.supply[pump][position] for pump in ("PU-A", "PU-B")}
        sources = {pump: Source(line, 0, line) for pump, line in lines.items()}
        delivered = {"PU-A": half, "PU-B": half}
        vessels = {"flask": self.delivered_mL}
        return ledger.Ledger(vessels, {}, delivered, counts, sources, self.outlet)

    def learn(self) -> None:
        """A start as it is done: priming at 2 mL/min, then half of it."""
        self.run(240)
        self.total_mL_min = 1.0
        self.run(120)

    def last(self, tag: str) -> float:
        """The last value of a tag."""
        return self.values[tag][-1]

    def all(self, tag: str) -> set[float]:
        """All values that a tag has had."""
        return set(self.values[tag])
