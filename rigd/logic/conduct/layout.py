"""What the sequence looks up every scan, made once per run: per pump its liquids, tags and sizes, and the main tags."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigd.logic.flow_path import Feed, FlowPath
from rigd.logic.program import Program
from rigd.model.recipe import Recipe
from rigd.model.rig import Column, LiquidRole, Pump, RigDefinition, Tag, TagKind

_RECORDED = ("temperature", "pressure", "fraction", "concentration")

LIQUID_J_mL_K = 1.9
"""Heat capacity of an organic liquid by volume, 1.6 to 2.2 (common practice, no source)."""

UNKNOWN = ""
"""What is in a syringe before this run has filled it."""


def liquid_of(label: str) -> str:
    """The liquid in a syringe with this label; rinses of a liquid are labelled ``liquid~1``, ``liquid~2``..."""
    return label.partition("~")[0]


@dataclass(frozen=True, slots=True)
class PumpLayout:
    """One pump. ``solvent`` and ``reagent`` are liquid ids, "" when the pump cannot draw one."""

    pump: Pump
    feed: Feed
    solvent: str
    reagent: str
    period_s: float
    supply_mL: Mapping[str, float]

    @property
    def id(self) -> str:
        """The pump's id."""
        return self.pump.id

    @property
    def dual(self) -> bool:
        """True when one syringe delivers while the other fills."""
        return self.pump.syringes > 1

    @property
    def rinse_mL(self) -> float:
        """A rinse draws the old liquid out of the line from the valve and dilutes the dead volume."""
        return 1.5 * self.feed.inlet_mL + 3.0 * self.pump.dead_mL + 0.05

    def guard_mL(self, flow_mL_min: float) -> float:
        """Level at which a pump that must not run empty has to stop: one sample and one order late."""
        return 0.02 + flow_mL_min * (self.period_s + 0.5) / 60.0

    def reserve_mL(self, flow_mL_min: float) -> float:
        """What is filled beyond the need, so that the need can be delivered before the guard."""
        return self.guard_mL(flow_mL_min) + 0.03

    def refill_s(self, volume_mL: float) -> float:
        """Time to draw a volume."""
        return 60.0 * volume_mL / self.pump.refill_rate_mL_min

    def tag(self, channel: str) -> str:
        """Tag id of a channel."""
        return f"{self.pump.id}.{channel}"


@dataclass(frozen=True, slots=True)
class Layout:
    """The rig as the sequence sees it. Tag ids are "" when the rig has no such sensor.

    ``dead_mL`` lies between the place where the signal is measured and the outlet valve. ``record`` are the tags that
    are averaged over a point, ``watch`` all that the sequence reads; of the three alerts one at a time holds the tags
    whose new samples make it think at once. ``warming_s`` is what the bed takes to its new temperature profile after a
    change of flow. ``foreseen``: a plan is being made, and no signal measured.
    """

    program: Program
    pumps: Mapping[str, PumpLayout]
    hand_valves: frozenset[str]
    jacket: str
    bed: str
    pressures: tuple[str, ...]
    record: tuple[str, ...]
    signal_part: str
    trunk_mL: float
    dead_mL: float
    band_K: float
    watch: tuple[str, ...]
    usual_alert: frozenset[str]
    calm_alert: frozenset[str]
    pressure_alert: frozenset[str]
    warming_s: float = 0.0
    foreseen: bool = False

    @property
    def recipe(self) -> Recipe:
        """The recipe of this run."""
        return self.program.recipe

    @property
    def rig(self) -> RigDefinition:
        """The rig of this run."""
        return self.program.rig

    @property
    def path(self) -> FlowPath:
        """The flow path of the rig."""
        return self.program.path

    def solvent_pumps(self) -> tuple[str, ...]:
        """Pumps that can draw solvent."""
        return tuple(name for name, play in self.pumps.items() if play.solvent)


def make_layout(program: Program) -> Layout:
    """Look everything up once."""
    rig, path, tags = program.rig, program.path, program.tags
    pumps = {feed.pump: _pump_layout(program, feed) for feed in path.feeds}
    pressures = tuple(t.id for t in rig.tags if t.measures == "pressure" and t.kind is TagKind.MEASURED)
    signal_part = _signal_part(program)
    jacket = _jacket(program)
    record = tuple(t.id for t in rig.tags if t.measures in _RECORDED or t.at in {c.id for c in rig.cells})
    quick = frozenset(tag for tag in tags if tag.endswith((".level", ".position", ".state")))
    signal = frozenset({program.recipe.settle.signal} & tags.keys())
    feedback = {tag.id for tag in rig.tags if tag.id.partition(".")[0] in {*program.pumps, *program.valves}}
    return Layout(
        program=program,
        pumps=pumps,
        hand_valves=frozenset(valve.id for valve in rig.valves if not valve.device),
        jacket=jacket,
        bed=next((t.id for t in rig.tags if _at(t, program.rig, "middle", "outlet", "inlet")), jacket),
        pressures=pressures,
        record=record,
        signal_part=signal_part,
        trunk_mL=path.trunk_mL,
        dead_mL=path.trunk_mL - path.past_part_mL(signal_part) if signal_part else 0.0,
        band_K=program.recipe.conditioning.band_K if program.recipe.conditioning else 1.0,
        usual_alert=quick,
        calm_alert=signal,
        pressure_alert=quick | frozenset(pressures),
        warming_s=_warming_s(program),
        watch=tuple(sorted({*feedback, jacket, program.recipe.settle.signal, *pressures, *record} & tags.keys())),
    )


def _pump_layout(program: Program, feed: Feed) -> PumpLayout:
    pump = program.pumps[feed.pump]
    drawn = list(feed.supply.values())
    level = program.tags.get(f"{pump.id}.level")
    return PumpLayout(
        pump=pump,
        feed=feed,
        solvent=next((liquid for liquid in drawn if program.is_solvent(liquid)), ""),
        reagent=next((liquid for liquid in drawn if program.liquids[liquid].role is LiquidRole.REAGENT), ""),
        period_s=level.period_ns / 1e9 if level else 1.0,
        supply_mL={line.liquid: line.volume_mL for line in program.path.supply_lines if line.pump == pump.id},
    )


def _at(tag: Tag, rig: RigDefinition, *places: str) -> bool:
    part, _, place = tag.at.partition(".")
    return tag.measures == "temperature" and place in places and part in {column.id for column in rig.columns}


def _jacket(program: Program) -> str:
    """The tag that says how warm the jacket is: a sensor on it, else the bath of the chiller that feeds it."""
    on_jacket = next((tag.id for tag in program.rig.tags if _at(tag, program.rig, "jacket")), "")
    baths = (f"{column.jacket}.bath" for column in program.rig.columns if column.jacket)
    return on_jacket or next((bath for bath in baths if bath in program.tags), "")


def _warming_s(program: Program) -> float:
    """Four time constants of the slowest bed against its wall: of a change of the profile 2 % are left then."""
    return 4.0 * max((_against_wall_s(column) for column in program.rig.columns if column.jacket), default=0.0)


def _against_wall_s(column: Column) -> float:
    volume_mL = math.pi / 4.0 * column.bore_mm**2 * column.length_mm / 1e3
    return volume_mL * LIQUID_J_mL_K / column.wall_conductance_W_K if column.wall_conductance_W_K > 0 else 0.0


def _signal_part(program: Program) -> str:
    """The part of the trunk where the settling signal is measured; the last column when it is not on the trunk."""
    on_trunk = [segment.id for segment in program.path.trunk]
    tag = program.tags.get(program.recipe.settle.signal)
    part = tag.at.partition(".")[0] if tag else ""
    if part in on_trunk:
        return part
    columns = [segment.id for segment in program.path.trunk if segment.kind == "column"]
    return columns[-1] if columns else (on_trunk[-1] if on_trunk else "")
