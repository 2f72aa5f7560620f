"""The witness in whole nights: a healthy one shows it nothing, a leak is what it is."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigd.adapters.plugins import plant_maker
from rigd.config import load_pair
from rigd.logic.program import compile_program
from rigd.ports.plant import FaultSpec
from rigd.prove.branch import Job, Moment, run_job
from rigd.prove.judge import HELD, UNSEEN, Night
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


def leak_in_the_last_point(rig: Path) -> Night:
    moment = Moment("point-P06", 2_100_000_000_000)
    job = Job(str(rig), str(RECIPE), 1, (FaultSpec("leak", "L-2", magnitude=0.05),), (moment,), 2_700_000_000_000)
    (night,) = run_job(job)
    return night


def test_a_small_leak_is_dangerous_and_a_leak_tray_stops_it(tmp_path: Path) -> None:
    """What the proof says to add does help: 5 minutes of a leak without pressure change, and none with a tray."""
    bare = leak_in_the_last_point(RIG)
    assert (bare.verdict, bare.severity) == (UNSEEN, DANGEROUS)
    assert "ran out onto the bench" in bare.harm
    assert "leak tray" in bare.add
    text = RIG.read_text(encoding="utf-8").replace("../chemistry/", f"{CONFIGS}/chemistry/")
    with_tray = tmp_path / "rig.toml"
    with_tray.write_text(text.replace('[[alarms]]\nid = "PRESSURE-RISING"\n', TRAY), encoding="utf-8")
    seen = leak_in_the_last_point(with_tray)
    assert (seen.verdict, seen.stop, seen.first_out) == (HELD, "cut", "TRAY-WET"), seen
