"""Property sets: of the library, of the user, of nobody; and what `rigd check` prints of them."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from fakes.config_files import RIG, edited, rig_problems_of, write
from fakes.sim_rigs import S_NS, two_pump_rig

from rigd.adapters.plugins import property_library
from rigd.config import load_rig
from rigd.console.checking import check_files
from rigd.model.errors import ConfigError
from rigd.model.orders import Action
from rigd.model.rig import PropertySet
from rigd_sim.physics.properties import solvents_of
from rigd_sim.plant import RigPlant

OWN = """[[properties]]
id = "house mixture"
density = ["0.95 g/mL", "0.93 g/mL", "0.90 g/mL"]
viscosity = ["3.6 mPa s", "2.2 mPa s", "1.2 mPa s"]
vapour_pressure = ["10 mbar", "60 mbar", "250 mbar"]
heat_capacity = "3.1 J/(g K)"
boiling = "81 degC"
source = "measured here with a falling ball, invented"

"""


def test_a_users_own_set_is_read_used_and_printed_with_its_source(tmp_path: Path) -> None:
    text = RIG.replace('properties = "ethanol"', 'properties = "house mixture"')
    text = text.replace("[simulation]", OWN + "[simulation]")
    path = write(tmp_path, text)[0]
    rig = load_rig(path)
    mixture = solvents_of(rig)["house mixture"]
    assert mixture.viscosity(298.15) == pytest.approx(2.2e-3)
    assert mixture.density(333.15) == pytest.approx(900.0)
    (told,) = check_files(path, None).liquids
    assert (told.id, told.source) == ("house mixture", "measured here with a falling ball, invented")
    assert RigPlant(rig, 1).contents.fluid().heat_capacity_J_kg_K == pytest.approx(3100.0)


def test_pressure_drop_follows_the_users_viscosity() -> None:
    """Hagen-Poiseuille and Ergun at low Re are linear in viscosity: twice as thick, twice the drop."""
    drops = []
    for factor in (1.0, 2.0):
        rig = two_pump_rig()
        (ethanol,) = property_library().sets(rig)
        thick = tuple(factor * mu for mu in ethanol.viscosity_mPa_s)
        own = replace(ethanol, viscosity_mPa_s=thick)  # type: ignore[arg-type]
        plant = RigPlant(replace(rig, properties=(own,)), 1)
        for name in plant.pumps:
            plant.tell(name, Action.FILL, 5.0)
        plant.advance(60 * S_NS)
        for name in plant.pumps:
            plant.tell(name, Action.SWAP, 0.0)
            plant.tell(name, Action.DELIVER, 1.0)
        plant.advance(180 * S_NS)
        truth = plant.truth()
        drops.append(truth["pressure:TEE"] - truth["pressure:BPR.in"])
    assert drops[1] / drops[0] == pytest.approx(2.0, rel=0.02)


def test_a_solvent_that_nobody_knows_is_said_with_what_is_known(tmp_path: Path) -> None:
    text = RIG.replace('properties = "ethanol"', 'properties = "etanol"')
    path = write(tmp_path, text)[0]
    found = [p for p in check_files(path, None).problems if p.code == "properties-unknown"]
    assert "etanol" in found[0].message
    assert "ethanol" in found[0].remedy
    with pytest.raises(ConfigError, match="etanol"):
        RigPlant(load_rig(path), 1)


def test_a_set_needs_its_source(tmp_path: Path) -> None:
    block = OWN.replace('source = "measured here with a falling ball, invented"\n', "")
    problems = rig_problems_of(tmp_path, edited(RIG, ("[simulation]", block + "[simulation]")))
    assert ("key-missing", "properties[house mixture].source") in [(p.code, p.key) for p in problems]


def test_the_library_gives_values_of_the_contract() -> None:
    for one in property_library().sets(two_pump_rig()):
        assert isinstance(one, PropertySet)
        assert one.source
