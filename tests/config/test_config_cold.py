"""Cold baths and relief valves of a rig file: what condenses, what freezes, what opens too late."""

from __future__ import annotations

from pathlib import Path

import chemicals
import pytest
from chemicals.iapws import iapws95_Psat
from fakes.config_files import CHEMISTRY, RECIPE, RIG, Row, edited, problems_of, rig_problems_of, within
from scipy.optimize import brentq

from rigd.config import read_rig
from rigd.config.checks.cold import MELTING_DEGC, dew_point_degC
from rigd.model.problems import Severity

RELIEF = '[[reliefs]]\nid = "RV"\nat = "TEE"\nto = "waste"\nset_pressure = "15 bar"\n\n'
CAS = {
    "water": "7732-18-5", "methanol": "67-56-1", "ethanol": "64-17-5", "acetonitrile": "75-05-8", "toluene": "108-88-3",
    "THF": "109-99-9", "ethyl acetate": "141-78-6", "dichloromethane": "75-09-2", "chloroform": "67-66-3",
}  # fmt: skip

ROWS = (
    Row("relief-place", "reliefs[RV].at", 'at = "flask"', add=RELIEF.replace('"TEE"', '"flask"')),
    Row("relief-outlet", "reliefs[RV].to", 'to = "bottle-S"', add=RELIEF.replace('"waste"', '"bottle-S"')),
    Row(
        "relief-reseat",
        "reliefs[RV].reseat_pressure",
        'reseat_pressure = "15 bar"',
        add=RELIEF.replace('"15 bar"\n', '"15 bar"\nreseat_pressure = "15 bar"\n'),
    ),
    Row("relief-above-rating", "reliefs[RV].set_pressure", '"20 bar"', add=RELIEF.replace("15 bar", "20 bar")),
    Row(
        "bath-below-dew-point",
        "chillers[CH].safe_temperature",
        'safe_temperature = "8 degC"',
        within("CH", 'safe_temperature = "20 degC"', 'safe_temperature = "8 degC"'),
        warning=True,
    ),
    Row(
        "coolant-freezes",
        "chillers[CH].safe_temperature",
        'safe_temperature = "2 degC"',
        within("CH", 'safe_temperature = "20 degC"', 'safe_temperature = "2 degC"'),
        also=("bath-below-dew-point",),
        warning=True,
    ),
)


@pytest.mark.parametrize("row", ROWS, ids=lambda row: row.code)
def test_exactly_this_is_said(row: Row, tmp_path: Path) -> None:
    row.check(tmp_path)


def test_solvent_that_freezes_forbids_the_run(tmp_path: Path) -> None:
    """Chloroform at -70 degC, with a coolant that bears it."""
    wide = 'range = ["-90 degC", "95 degC"]\ncoolant_freezes = "-95 degC"'
    cold = within("CH", 'range = ["-10 degC", "95 degC"]', wide)
    rig = edited(RIG, *cold).replace('properties = "ethanol"', 'properties = "chloroform"')
    rig = rig.replace('safe_temperature = "20 degC"', 'safe_temperature = "-70 degC"')
    told = {problem.code: problem.severity for problem in rig_problems_of(tmp_path, rig)}
    assert told["solvent-freezes"] is Severity.ERROR
    assert "coolant-freezes" not in told


def test_a_point_below_the_dew_point_is_said_for_the_recipe(tmp_path: Path) -> None:
    """A humid room makes 20 degC too cold; the room is written in the rig file."""
    humid = RIG.replace('ambient = "22 degC"', 'ambient = "26 degC"\nhumidity = "90 %"')
    keys = {p.key for p in problems_of(tmp_path, humid, RECIPE) if p.code == "bath-below-dew-point"}
    assert "park.temperature" in keys
    assert not [p for p in problems_of(tmp_path, RIG, RECIPE) if p.code == "bath-below-dew-point"]


@pytest.mark.parametrize("room", [5.0, 22.0, 35.0])
@pytest.mark.parametrize("humidity", [0.2, 0.5, 0.9])
def test_dew_point(room: float, humidity: float) -> None:
    """Where the saturation pressure of water (IAPWS-95, library ``chemicals``) is the room's vapour pressure.

    Only above 0 degC: below, the formula is for supercooled water and the library's curve ends.
    """
    found = dew_point_degC(room, humidity)
    if found > 0.1:
        vapour = humidity * iapws95_Psat(room + 273.15)
        assert found == pytest.approx(brentq(lambda t: iapws95_Psat(t + 273.15) - vapour, 0.01, room + 1.0), abs=0.1)
    assert found < room


@pytest.mark.parametrize("name", MELTING_DEGC)
def test_melting_points_are_those_of_the_library(name: str) -> None:
    assert MELTING_DEGC[name] == pytest.approx(chemicals.Tm(CAS[name]) - 273.15, abs=0.11)


def test_relief_in_the_rig(tmp_path: Path) -> None:
    """Nine tenths of the set pressure unless another reseat pressure is written."""
    path = tmp_path / "rigs"
    path.mkdir()
    (tmp_path / "chemistry").mkdir()
    (tmp_path / "chemistry/esterification.toml").write_text(CHEMISTRY, encoding="utf-8")
    (path / "rig.toml").write_text(edited(RIG, ("[simulation]", f"{RELIEF}[simulation]")), encoding="utf-8")
    (relief,) = read_rig(path / "rig.toml").rig.reliefs
    assert (relief.at, relief.to, relief.set_bar, relief.reseat_bar) == ("TEE", "waste", 15.0, 13.5)
