"""Calibrations at work: true values above the driver, the device's own below; a whole run on them, replayed."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from fakes.config_files import write

from rigd.adapters.journal_reader import JournalReader
from rigd.adapters.journal_sqlite import SqliteJournal
from rigd.adapters.plugins import plant_maker, simulator_maker
from rigd.app import _dry_facts, make_drivers
from rigd.config import load_pair
from rigd.conformance.bench import order, run
from rigd.logic.program import compile_program
from rigd.model.calibration import Corrections
from rigd.model.devices import DeviceIdentity, LastWill, LinkSpec
from rigd.model.errors import LocalProtocolError
from rigd.model.events import EventKind
from rigd.model.orders import Action, Order
from rigd.model.rig import RigDefinition
from rigd.model.samples import Reading
from rigd.ports.link import Line
from rigd.ports.plant import Plant
from rigd.runtime.calibrated import (
    COUNTED,
    CalibratedDriver,
    SensorLine,
    calibrated_drivers,
    calibrated_rig,
    corrections_of,
)
from rigd.runtime.deep import DeepShell
from rigd.runtime.dry import DryOptions, DryShell
from rigd.runtime.replay import replay
from rigd.runtime.spectra import cell_readers

WILL = LastWill("pump-a", LinkSpec("bus", "memory"), ())


class Pump:
    """A driver that notes orders and counts in its own measure."""

    def __init__(self) -> None:
        self.told: list[tuple[Action, float]] = []

    async def identify(self, line: Line) -> DeviceIdentity:
        return DeviceIdentity("a", "b", "c")

    async def prepare(self, line: Line) -> bool:
        return False

    async def poll(self, line: Line, channels: Sequence[str]) -> Sequence[Reading]:
        known = {"flow": 1.0, "level": 2.0, "standby": 3.0, "delivered": 4.0, "state": 1.0, "p1": 5.03, "t1": 60.0}
        return [Reading(channel, known[channel]) for channel in channels]

    async def execute(self, line: Line, order: Order) -> None:
        self.told.append((order.action, order.value))

    def last_will(self, link: LinkSpec) -> LastWill:
        return WILL


def test_wishes_and_counts_are_true_values() -> None:
    pump = Pump()
    driver = CalibratedDriver(pump, 1.02, {"p1": SensorLine(0.03, 0.5, 0.0, 25.0)})
    line: Line = None  # type: ignore[assignment]

    async def work() -> None:
        for action in (Action.DELIVER, Action.FILL, Action.SWAP, Action.STOP):
            await driver.execute(line, order(action, 2.04))
        channels = ("flow", "level", "standby", "delivered", "state", "p1", "t1")
        told = [one.value for one in await driver.poll(line, channels)]
        assert told == pytest.approx([1.02, 2.04, 3.06, 4.08, 1.0, 2.5, 60.0])
        with pytest.raises(LocalProtocolError):
            await driver.spectrum(line)

    run(work())
    assert pump.told == [
        (Action.DELIVER, pytest.approx(2.0)), (Action.FILL, pytest.approx(2.0)),
        (Action.SWAP, 2.04), (Action.STOP, 2.04),
    ]  # fmt: skip
    assert driver.last_will(LinkSpec("bus", "memory")) is WILL


@pytest.mark.parametrize("shown", [25.9, 26.7, -0.4, -5.0, float("inf")])
def test_a_correction_never_brings_a_broken_loop_back_into_its_span(shown: float) -> None:
    """Beyond 103.125 % or -1.25 % of span (NAMUR NE 43) the core must see what the sensor showed."""
    assert SensorLine(2.0, 0.9, 0.0, 25.0).true(shown) == shown
    assert SensorLine(2.0, 0.9, 0.0, 25.0).true(25.0) == pytest.approx(20.7)


def test_only_what_is_calibrated_is_wrapped_and_the_rig_becomes_the_true_one(tmp_path: Path) -> None:
    rig = load_pair(*write(tmp_path)).rig
    found = Corrections({"PU-A": 0.97}, {"TT-1": (0.2, 1.0)})
    drivers = make_drivers(rig)
    wrapped = calibrated_drivers(drivers, rig, found)
    assert {name for name in drivers if wrapped[name] is not drivers[name]} == {"pump-a", "sensors"}
    true = calibrated_rig(rig, found)
    pumps, declared = ({pump.id: pump for pump in one.pumps} for one in (true, rig))
    assert pumps["PU-A"].stroke_mL == pytest.approx(0.97 * 5.0)
    assert pumps["PU-A"].rate_max_mL_min == pytest.approx(0.97 * 5.0)
    assert pumps["PU-B"] == declared["PU-B"]
    assert true.tag("PU-A.level").high == pytest.approx(0.97 * rig.tag("PU-A.level").high)
    assert true.tag("PU-A.state") == rig.tag("PU-A.state")
    assert calibrated_rig(rig, Corrections()) is rig
    assert not corrections_of("")


FACTS = [
    {"kind": "pump calibration", "subject": "PU-A", "utc": "2026-01-01T00:00:00+00:00", "who": "B",
     "due_utc": "2999-01-01T00:00:00+00:00", "values": {"factor": 0.97}, "overdue": False},
    {"kind": "pump calibration", "subject": "PU-B", "utc": "2026-01-01T00:00:00+00:00", "who": "B",
     "due_utc": "2999-01-01T00:00:00+00:00", "values": {"factor": 0.97}, "overdue": False},
    {"kind": "sensor calibration", "subject": "PT-1", "utc": "2026-01-01T00:00:00+00:00", "who": "B",
     "due_utc": "2999-01-01T00:00:00+00:00", "values": {"zero": 0.05, "gain": 1.0}, "overdue": False},
]  # fmt: skip


class Measured:
    """A plant seen through calibrations: what a live run sees when its devices are off by the factors."""

    def __init__(self, plant: Plant, rig: RigDefinition, found: Corrections) -> None:
        self.plant, self.rig = plant, rig
        self.units = {pump.id: found.pumps[pump.id] for pump in rig.pumps}
        self.devices = {pump.device: found.pumps[pump.id] for pump in rig.pumps}

    def tell(self, unit: str, action: Action, value: float) -> str:
        told = value / self.units[unit] if action in (Action.DELIVER, Action.FILL) else value
        return self.plant.tell(unit, action, told)

    def read(self, device: str, channels: Sequence[str]) -> Sequence[Reading]:
        factor = self.devices.get(device, 1.0)
        return [
            replace(one, value=one.value * (factor if one.channel in COUNTED else 1.0))
            for one in self.plant.read(device, channels)
        ]

    def __getattr__(self, name: str) -> Any:
        return getattr(self.plant, name)


@pytest.mark.slow
@pytest.mark.parametrize("factor", [0.97, 1.04])
def test_a_whole_recipe_holds_together_on_pumps_that_are_off(tmp_path: Path, factor: float) -> None:
    """Strokes, fills, refills, ledger and limits are of one piece: nothing stalls, and the volumes agree."""
    pair = load_pair(*write(tmp_path))
    assert pair.recipe is not None
    found = Corrections({"PU-A": factor, "PU-B": factor})
    plant = Measured(plant_maker().make(pair.rig, 7), pair.rig, found)
    program = compile_program(calibrated_rig(pair.rig, found), pair.recipe)
    shell = DryShell(program, plant, cell_readers(pair.rig))  # type: ignore[arg-type]
    result = shell.run()
    assert result.outcome == "done", result.text
    assert not [event for event in result.events if event.kind is EventKind.TRIP]
    told_mL = 230.0 - plant.truth()["volume:bottle-A"]
    assert 230.0 - result.state.protect.ledger.vessels["bottle-A"] == pytest.approx(factor * told_mL, rel=0.005)


@pytest.mark.slow
@pytest.mark.timeout(180)
def test_a_live_run_on_calibrated_parts_speaks_the_devices_own_measure_and_replays(tmp_path: Path) -> None:
    """The first minutes over real bytes: priming draws, fills and changes over; recorded, and decided again."""
    rig_path, recipe_path = write(tmp_path)
    pair = load_pair(rig_path, recipe_path)
    assert pair.recipe is not None
    found = corrections_of(FACTS)
    program = compile_program(calibrated_rig(pair.rig, found), pair.recipe)
    plant = plant_maker().make(pair.rig, 7)
    lines = simulator_maker().lines(pair.rig, plant, 1.0, 7)
    (tmp_path / "run").mkdir()
    facts = {**_dry_facts(program, rig_path, recipe_path), "calibrations": json.dumps(FACTS)}
    journal = SqliteJournal(tmp_path / "run/run.sqlite", facts, pair.rig.tags)
    drivers = calibrated_drivers(make_drivers(pair.rig), pair.rig, found)
    result = DeepShell(program, plant, lines, drivers, journal, None).run(DryOptions(limit_ns=120 * 10**9))
    journal.close(result.outcome)
    assert not [event for event in result.events if event.kind is EventKind.TRIP]
    assert replay(tmp_path / "run").same
    with JournalReader(tmp_path / "run") as reader:
        least_bar = min(reader.series("PT-1").values)
    counted_mL = 900.0 - result.state.protect.ledger.vessels["bottle-S"]
    told_mL = 900.0 - plant.truth()["volume:bottle-S"]
    assert told_mL > 2.0
    assert counted_mL == pytest.approx(0.97 * told_mL, rel=0.02)
    assert least_bar < -0.01  # it shows 0.05 bar less than there is
