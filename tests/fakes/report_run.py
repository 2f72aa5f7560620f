"""A run that never was, written as a real journal: invented signals with a known rate constant behind them."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from fakes.conduct_rigs import demo_recipe, two_pumps

from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.analysis.kinetics import Feed, Law, conversion
from rigd.logic.flow_path import flow_path
from rigd.model.chemistry import Chemistry, RateLaw, Reaction, ReactionPlace, Species
from rigd.model.devices import ChannelSpec, DeviceSpec
from rigd.model.events import Event, EventKind
from rigd.model.intake import Intake
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock
from rigd.model.recipe import Recipe
from rigd.model.rig import Liquid, LiquidRole, RigDefinition
from rigd.model.samples import Quality, Sample

SECOND_NS = 1_000_000_000
TRUE_K = 0.001
FEED = Feed(1.0, 16.0)
PHASES = (("prime", 60), ("conditioning", 240), ("leak test", 80), ("switchover", 120))
SETTLE_S, COLLECT_S = 110, 40


def invented_rig() -> RigDefinition:
    """The two-pump rig of the conduct tests with a reversible reaction, devices and one interlock."""
    rig = two_pumps()
    reaction = Reaction(
        "r", {"a": -1, "b": -1, "p": 1, "w": 1}, RateLaw.REVERSIBLE, ReactionPlace.CATALYST, TRUE_K, 60.0, 58.0,
        {"a": 1, "b": 1}, {"p": 1, "w": 1}, 4.0,
    )  # fmt: skip
    species = tuple(Species(name, name, 60.0) for name in "abpw")
    devices = [
        DeviceSpec(
            f"dev-{pump.id}", "syringe-pump", "bracket", "bus", "11", pump.id,
            tuple(ChannelSpec(name, f"{pump.id}.{name}", SECOND_NS) for name in ("delivered", "level", "standby")),
        )
        for pump in rig.pumps
    ] + [
        DeviceSpec(
            f"dev-{valve.id}", "selector-valve", "bracket", "bus", "21", valve.id,
            (ChannelSpec("position", f"{valve.id}.position", SECOND_NS),),
        )
        for valve in rig.valves
    ]  # fmt: skip
    return replace(
        rig,
        title="Two pumps and one packed column (invented)",
        chemistry=Chemistry("invented esterification", species, (reaction,), "a", "p"),
        liquids=(
            Liquid("solvent", "solvent b", LiquidRole.SOLVENT, "ethanol", {"b": 17.0}),
            Liquid("feed-A", "a in b", LiquidRole.REAGENT, "ethanol", {"a": 2.0, "b": 15.0}),
            Liquid("feed-B", "b", LiquidRole.REAGENT, "ethanol", {"b": 17.0}),
        ),
        tags=tuple(
            replace(tag, measures="flow", unit="mL/min") if tag.id.endswith(".flow") else tag for tag in rig.tags
        ),
        devices=tuple(devices),
        interlocks=(
            Interlock("PRESSURE-HIGH", "Pressure high-high", (Condition(ConditionKind.HIGH, "PT-1", 8.0),), Stop.CUT),
        ),
        digest="0" * 64,
    )


def invented_recipe() -> Recipe:
    """The demonstration sweep."""
    return replace(demo_recipe(), title="Six flow rates at 60 degC (invented)")


@dataclass
class _Tape:
    journal: SqliteJournal
    rig: RigDefinition
    recipe: Recipe
    chance: np.random.Generator
    number: int = 0
    delivered: float = 0.0
    bed_degC: float = 22.0

    def second(self, flow: float, conversion_now: float | None, valve: int, events: tuple[Event, ...] = ()) -> None:
        self.number += 1
        now_ns = self.number * SECOND_NS
        noise = self.chance.normal
        self.delivered += flow / 2 / 60
        self.bed_degC += (60.0 - self.bed_degC) / 50.0
        values = {
            "PT-1": 2.0 + 0.35 * flow + noise(0, 0.012),
            "TT-1": self.bed_degC + noise(0, 0.05),
            "TT-2": self.bed_degC + 0.4 + noise(0, 0.05),
            "V-A.position": valve,
            "V-B.position": valve,
            "V-OUT.position": 0,
        }
        for pump in self.rig.pumps:
            values |= {f"{pump.id}.flow": flow / 2, f"{pump.id}.delivered": self.delivered}
            values |= {f"{pump.id}.level": 5 - self.delivered % 5, f"{pump.id}.standby": 5.0}
        if self.number % 5 == 0 and conversion_now is not None:
            values["IR.conversion"] = conversion_now + noise(0, 0.006)
        samples = tuple(Sample(tag, float(value), now_ns, Quality.GOOD) for tag, value in values.items())
        utc = f"2030-01-01T{self.number // 3600:02d}:{self.number % 3600 // 60:02d}:{self.number % 60:02d}.000+00:00"
        self.journal.scan(self.number, now_ns, utc, Intake(samples=samples))
        self.journal.decided(self.number, (), events)

    def event(self, kind: EventKind, subject: str, text: str, **fields: str | float | int | bool) -> Event:
        return Event(kind, subject, (self.number + 1) * SECOND_NS, text, fields)


def write_run(folder: Path, simulated: bool = True, trip_after: int | None = None, close: bool = True) -> Path:
    """Write the journal of a whole sweep, or of one that trips after so many points; returns the run folder."""
    folder.mkdir(parents=True, exist_ok=True)
    rig, recipe = invented_rig(), invented_recipe()
    meta = {"run": folder.name, "rig": rig.name, "recipe": recipe.name, "simulated": "yes" if simulated else "no"}
    journal = SqliteJournal(folder / "run.sqlite", meta | {"pace": "20", "version": "0.0-test"}, rig.tags)
    tape = _Tape(journal, rig, recipe, np.random.default_rng(5))
    for item in recipe.checklist:
        signed = tape.event(EventKind.PROMPT, item.id, f"{item.id} confirmed.", status="confirmed", who="Nobody")
        tape.second(0.0, None, 0, (signed,))
    for name, length_s in PHASES:
        _phase(tape, name, length_s, 2.0 if name != "leak test" else 0.0)
    for index, point in enumerate(recipe.points):
        if trip_after == index:
            return _trip(tape, folder)
        _point(tape, point)
    _phase(tape, "flush", 150, 4.0)
    done = tape.event(EventKind.RUN_STATE, "complete", "All points were collected and the rig is parked.")
    tape.second(0.0, None, 0, (done,))
    if close:
        journal.close("done")
    return folder


def true_conversion(residence_s: float) -> float:
    """What the rate constant gives; it refers to the liquid between the beads."""
    path = flow_path(two_pumps())
    return conversion(Law.REVERSIBLE, TRUE_K, residence_s * path.interstitial_mL / path.column_mL, FEED, 4.0)


def _phase(tape: _Tape, name: str, length_s: int, flow: float) -> None:
    begin = tape.event(EventKind.PHASE, name, f"{name} begins.", label=name, point="", step="")
    for second in range(length_s):
        tape.second(
            flow, 0.0 if name == "switchover" else None, int(name == "switchover"), (begin,) if not second else ()
        )


def _point(tape: _Tape, point) -> None:
    flow = point.total_mL_min
    residence_s = 60.0 * flow_path(tape.rig).column_mL / flow
    final = true_conversion(residence_s)
    begin = tape.event(EventKind.PHASE, "sweep", f"Point {point.id} begins.", label="sweep", point=point.id)
    started = tape.event(EventKind.POINT, point.id, f"{point.id} begins.", status="started")
    for second in range(SETTLE_S):
        seen = final * (1 - math.exp(-second / 12.0))
        tape.second(flow, seen, 1, (begin, started) if not second else ())
    settled = tape.event(
        EventKind.POINT, point.id, f"{point.id} is steady.", status="settled", settle_s=float(SETTLE_S)
    )
    collecting = tape.event(
        EventKind.POINT, point.id, "Collecting.", status="collecting", residence_time_s=residence_s
    )  # fmt: skip
    for second in range(COLLECT_S):
        tape.second(flow, final, 1, (settled, collecting) if not second else ())
    collected = tape.event(
        EventKind.POINT, point.id, f"{point.id} collected.", status="collected", collected_mL=flow * COLLECT_S / 60
    )  # fmt: skip
    tape.second(flow, final, 1, (collected,))


def _trip(tape: _Tape, folder: Path) -> Path:
    trip = tape.event(
        EventKind.TRIP, "PRESSURE-HIGH", "PT-1 stood at 8.4 bar, above its limit of 8 bar.", first_out=True, tag="PT-1",
        value=8.4, limit=8.0, unit="bar", stop="cut", did="Pumps stopped, valves to solvent.", do="Find the block.",
    )  # fmt: skip
    tape.second(4.0, None, 1, (trip,))
    over = tape.event(EventKind.RUN_STATE, "tripped", "PRESSURE-HIGH stopped the run.")
    for second in range(20):
        tape.second(0.0, None, 0, (over,) if not second else ())
    tape.journal.close("tripped")
    return folder
