"""Early rules over whole rehearsed runs: healthy ones are silent, faults are told minutes before the trip.

Hazards of the project's own list: clog, partial block, leak, gas, exotherm. What makes a healthy run look ill (start,
flow step, temperature step, another liquid, change-over) is in each of the healthy ones (the steps
alone are in tests/logic/test_early_resistance.py).
"""

from __future__ import annotations

from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context

import pytest
from fakes.early_nights import STEADY, Morning, Night, night

pytestmark = [pytest.mark.slow, pytest.mark.timeout(400)]

FINE = (('bead_diameter = "200 um"', 'bead_diameter = "40 um"'),)
"""A bed that resists 25 times as much: most of the pressure falls in what is heated."""
OTHER_SOLVENT = (
    *FINE,
    (r'(id = "acid-feed"\nname = [^\n]*\nrole = "reagent"\nproperties = )"ethanol"', r'\1"methanol"'),
)
TWO_TEMPERATURES = (
    ('temperature = "60 degC"\nratio', 'temperature = ["60 degC", "40 degC"]\nratio'),
    ("count = 6", "count = 2"),
)
METERS = (
    (
        r"\[simulation\]",
        """[[sensors]]
tag = "FT-1"
title = "flow into the bed"
measures = "flow"
at = "COL.inlet"
span = ["0 mL/min", "10 mL/min"]
device = "sensors"
channel = "f1"
noise = "0.02 mL/min"

[[sensors]]
tag = "WT-1"
title = "balance under the waste"
measures = "volume"
at = "waste"
span = ["0 mL", "2 L"]
device = "sensors"
channel = "w1"
noise = "0.05 mL"

[simulation]""",
    ),
)
HEALTHY = {
    "half a night": Night(recipe="overnight-sweep", recipe_edits=(("count = 8", "count = 4"),), hours=9.0),
    "fine bed, two temperatures": Night(rig_edits=FINE, recipe_edits=TWO_TEMPERATURES),
    "reagent in another solvent": Night(rig_edits=OTHER_SOLVENT),
    "no regulator": Night(rig_edits=(('set_pressure = "2 bar"', 'set_pressure = "0.05 bar"'), *FINE)),
    "demo with meters": Night(seed=1, rig_edits=METERS),
    "one pump 1": Night("one-pump", "one-pump-sweep", 1),
    "one pump 2": Night("one-pump", "one-pump-sweep", 2),
    "three pumps 1": Night("three-pump-two-columns", "three-pump-sweep", 1),
    "single syringes 1": Night("two-pump-single", "single-sweep", 1),
    "single syringes 2": Night("two-pump-single", "single-sweep", 2),
}
ILL = {
    "clog in the bed": Night(fault=("clog", "COL", 800.0, 0.3), recipe_edits=STEADY),
    "clog at the outlet": Night(fault=("clog", "L-4", 800.0, 0.2), recipe_edits=STEADY),
    "partial block": Night(fault=("block", "COL", 900.0, 0.97)),
    "leak": Night(fault=("leak", "TEE", 900.0, 1.0)),
    "gas at the leak test": Night(fault=("bubble", "L-1", 560.0, 0.5)),
    "slipping pump": Night(rig_edits=METERS, fault=("slip", "PU-A", 900.0, 0.5)),
    "leak behind the bed": Night(rig_edits=METERS, fault=("leak", "IR", 900.0, 0.3)),
    "exotherm": Night(fault=("exotherm", "COL", 900.0, 8.0)),
}


@pytest.fixture(scope="module")
def mornings(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Morning]:
    asked = {**HEALTHY, **ILL}
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        folders = [str(tmp_path_factory.mktemp("night")) for _ in asked]
        return dict(zip(asked, pool.map(night, folders, asked.values(), timeout=300), strict=True))


@pytest.mark.parametrize("name", HEALTHY)
def test_a_healthy_run_says_nothing(name: str, mornings: dict[str, Morning]) -> None:
    found = mornings[name]
    assert (found.outcome, found.alarms, found.failed) == ("done", (), False)
    assert found.course, "nothing was learned, so nothing was watched"


@pytest.mark.parametrize(("name", "alarm"), [("clog in the bed", "CLOG-PT-1"), ("clog at the outlet", "CLOG-PT-2")])
def test_a_slow_clog_is_told_minutes_before_the_trip_with_the_time_left(
    name: str, alarm: str, mornings: dict[str, Morning]
) -> None:
    found = mornings[name]
    trip_s, told_s = found.first("PRESSURE-HIGH"), found.first(alarm)
    assert trip_s is not None
    assert told_s is not None
    assert trip_s - told_s > 5 * 60
    judged = [(t, left) for t, ratio, left in found.course if ratio > 2.0 and t < trip_s - 10]
    assert len(judged) > 200
    assert all(0.5 < left / (trip_s - t) < 2.0 for t, left in judged)
    assert "to 8 bar at this rate" in " ".join(found.texts)
    soon_s = found.first(alarm.replace("CLOG", "SOON"))
    assert soon_s is not None
    assert trip_s - soon_s > 5 * 60


def test_a_partial_block_is_told_and_has_no_time_left(mornings: dict[str, Morning]) -> None:
    found = mornings["partial block"]
    assert (found.first("CLOG-PT-1") or 1e9) < 900 + 3 * 60
    assert found.first("SOON-PT-1") is None
    assert not found.trips


def test_a_leak_is_told_within_two_minutes(mornings: dict[str, Morning]) -> None:
    told = [(name, at_s) for name, at_s in mornings["leak"].alarms if name.startswith("OPEN-")]
    assert told
    assert 900 < told[0][1] < 900 + 2 * 60


BALANCE = [("slipping pump", {"SHORT-FT-1", "SHORT-WT-1"}), ("leak behind the bed", {"SHORT-WT-1"})]


@pytest.mark.parametrize(("name", "alarms"), BALANCE)
def test_what_does_not_arrive_is_told_by_the_meters_behind_the_loss(
    name: str, alarms: set[str], mornings: dict[str, Morning]
) -> None:
    found = mornings[name]
    assert {alarm for alarm, at_s in found.alarms if at_s < 900 + 3 * 60} == alarms


def test_gas_is_told_by_the_leak_test(mornings: dict[str, Morning]) -> None:
    assert [name for name, _ in mornings["gas at the leak test"].alarms] == ["GAS-PT-1"]


def test_an_exotherm_is_told_minutes_before_the_trip(mornings: dict[str, Morning]) -> None:
    found = mornings["exotherm"]
    trip_s, told_s = found.first("BED-HOT"), found.first("HEAT-TT-1")
    assert trip_s is not None
    assert told_s is not None
    assert trip_s - told_s > 3 * 60
