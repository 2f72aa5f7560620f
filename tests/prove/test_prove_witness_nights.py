"""The witness in whole nights: a healthy one shows it nothing, a leak is what it is."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd.adapters.plugins import plant_maker
from rigd.config import load_pair
from rigd.logic.program import compile_program
from rigd.ports.plant import FaultSpec
from rigd.prove.branch import Job, Moment, run_job
from rigd.prove.judge import HELD, TOLD, UNSEEN, Night
from rigd.prove.witness import DANGEROUS, HARMLESS, Witness
from rigd.runtime.dry import DryShell
from rigd.runtime.spectra import cell_readers

pytestmark = [pytest.mark.slow, pytest.mark.timeout(120)]

CONFIGS = Path(__file__).parents[2] / "configs"
RIG, RECIPE = CONFIGS / "rigs" / "two-pump-column.toml", CONFIGS / "recipes" / "demo-sweep.toml"
TRAY = """
[[sensors]]
tag = "LEAK"
title = "float switch in the tray under the rig"
measures = "state"
labels = ["dry", "wet"]
at = "TEE"
device = "sensors"
channel = "p3"
period = "1 s"
stale_after = "5 s"

[[interlocks]]
id = "TRAY-WET"
title = "Liquid in the tray"
trip_when = [{ tag = "LEAK", equals = "wet" }]
vote = "1oo1"
on_bad = "trip"
delay = "2 s"
stop = "cut"
consequence = "flammable liquid on the bench"
response = "Keep ignition away; find where it came from."
basis = "common practice, no source"

[[alarms]]
id = "PRESSURE-RISING"
"""
"""A leak tray as a person writes it into a rig file, before the first alarm of the example."""
LOST = """
[[interlocks]]
id = "PRESSURE-LOST"
title = "No pressure behind the bed while the run goes on"
trip_when = [{ tag = "PT-2", below = "1 bar" }]
vote = "1oo1"
on_bad = "trip"
delay = "20 s"
stop = "cut"
armed = "running"
consequence = "liquid on the bench"
response = "Find the open fitting."
basis = "example: half of what the regulator keeps"

[[alarms]]
id = "PRESSURE-RISING"
"""
"""A low trip on pressure, the other thing that the proof says to add."""
LEAK = FaultSpec("leak", "L-2", magnitude=0.05)
BURST = FaultSpec("burst", "COL", magnitude=3.0)
LAST_POINT = Moment("point-P06", 2_100_000_000_000)


def test_a_healthy_night_shows_nothing() -> None:
    """Else the tolerances would call refills, lags and changes of flow a fault."""
    pair = load_pair(RIG, RECIPE)
    assert pair.recipe is not None
    program = compile_program(pair.rig, pair.recipe)
    witness = Witness(program, plant_maker().make(pair.rig, 1))
    witness.begin(0)
    result = DryShell(program, witness.plant, cell_readers(pair.rig, pair.recipe), watch=witness.look).run()
    assert result.outcome == "done"
    assert witness.findings("", 0.0) == (HARMLESS, "")


def night_with(rig: Path, fault: FaultSpec) -> Night:
    (night,) = run_job(Job(str(rig), str(RECIPE), 1, (fault,), (LAST_POINT,), 2_700_000_000_000))
    return night


@pytest.mark.parametrize(
    ("fault", "verdict", "add", "first_out"),
    [(LEAK, UNSEEN, TRAY, "TRAY-WET"), (BURST, TOLD, LOST, "PRESSURE-LOST")],
    ids=["leak", "burst"],
)
def test_a_fault_that_nothing_stops_is_dangerous_and_what_to_add_stops_it(
    tmp_path: Path, fault: FaultSpec, verdict: str, add: str, first_out: str
) -> None:
    """A small leak moves no pressure; after a burst an alarm comes and the pumps go on."""
    bare = night_with(RIG, fault)
    assert (bare.verdict, bare.severity) == (verdict, DANGEROUS)
    assert "ran out onto the bench" in bare.harm
    text = RIG.read_text(encoding="utf-8").replace("../chemistry/", f"{CONFIGS}/chemistry/")
    better = tmp_path / "rig.toml"
    better.write_text(text.replace('[[alarms]]\nid = "PRESSURE-RISING"\n', add), encoding="utf-8")
    seen = night_with(better, fault)
    assert (seen.verdict, seen.stop, seen.first_out) == (HELD, "cut", first_out), seen
