"""Every check of a chemistry file: one thing is wrong, and exactly that is said, at its key."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.config_files import CHEMISTRY, RIG, Edit, edited, problems_of, rig_problems_of, within

WATER = CHEMISTRY[CHEMISTRY.index('[[species]]\nid = "water"') :].split("\n\n")[0]

CHEMISTRY_ROWS = (
    ("name-reserved", "species[residual].id", ((WATER, WATER + "\n\n" + WATER.replace('"water"', '"residual"')),)),
    ("species-unknown", "reactant", (('reactant = "acetic acid"', 'reactant = "acetic acd"'),)),
    ("species-unknown", "product", (('product = "ethyl acetate"', 'product = "ester"'),)),
    (
        "species-unknown",
        "byproducts[1]",
        (('product = "ethyl acetate"', 'product = "ethyl acetate"\nbyproducts = ["ether"]'),),
    ),
    (
        "species-unknown",
        "reactions[esterification].orders.alcohol",
        (('orders = { "acetic acid" = 1, ethanol = 1 }', 'orders = { "acetic acid" = 1, alcohol = 1 }'),),
    ),
    (
        "reaction-unbalanced",
        "reactions[esterification].stoichiometry",
        ((', "ethyl acetate" = 1, water = 1 }\norders', ', "ethyl acetate" = 1 }\norders'),),
    ),
    (
        "reaction-unbalanced",
        "reactions[esterification].stoichiometry",
        (('molar_mass = "60.05 g/mol"', 'molar_mass = "61.05 g/mol"'),),
    ),
    ("unit-missing", "reactions[esterification].rate_constant", (('"0.001625 L/(mol s)"', '"0.001625"'),)),
    ("unit-wrong", "reactions[esterification].rate_constant", (('"0.001625 L/(mol s)"', '"0.001625 1/s"'),)),
    (
        "unit-wrong",
        "reactions[esterification].rate_constant",
        (('place = "catalyst"', 'place = "catalyst"\nper_gram = true'),),
    ),
    ("key-missing", "reactions[esterification].equilibrium_constant", (("equilibrium_constant = 4.0\n", ""),)),
    (
        "key-missing",
        "reactions[esterification].leached_species",
        (('place = "catalyst"', 'place = "catalyst"\nleached_species = "water"'),),
    ),
    (
        "species-unknown",
        "reactions[esterification].leached_species",
        (('place = "catalyst"', 'place = "catalyst"\nleaching = "0.01 %"\nleached_species = "resin"'),),
    ),
    (
        "key-missing",
        "reactions[esterification].deactivation_energy",
        (('deactivation = "0.005 1/h"', 'deactivation_energy = "90 kJ/mol"'),),
    ),
    (
        "key-out-of-place",
        "reactions[esterification].deactivation",
        (('place = "catalyst"', 'place = "liquid"'),),
    ),
    ("duplicate-id", "species[water].id", ((WATER, (WATER + "\n\n") * 2),)),
    ("choice-unknown", "reactions[esterification].law", (('law = "reversible"', 'law = "reversable"'),)),
    (
        "unit-wrong",
        "species[ethanol].bands[1].width",
        (('centre = "1047 1/cm", width = "22 1/cm"', 'centre = "1047 1/cm", width = "22 um"'),),
    ),
)


@pytest.mark.parametrize(
    ("code", "key", "edits"), CHEMISTRY_ROWS, ids=lambda value: value if isinstance(value, str) else ""
)
def test_exactly_this_is_said_about_a_chemistry(code: str, key: str, edits: tuple[Edit, ...], tmp_path: Path) -> None:
    problems = problems_of(tmp_path, chemistry=edited(CHEMISTRY, *edits))

    assert [(problem.code, problem.key) for problem in problems] == [(code, key)], [str(p) for p in problems]
    assert Path(problems[0].file).name == "esterification.toml"


@pytest.mark.parametrize("key", ['leaching = "0.01 %"', "deactivation_turnovers = 5000"])
def test_what_counts_sites_needs_sites(key: str, tmp_path: Path) -> None:
    chemistry = edited(CHEMISTRY, ('place = "catalyst"', f'place = "catalyst"\n{key}'))
    rig = edited(RIG, *within("COL", ', active_sites = "4.7 mmol/g"', ""))
    found = [(problem.code, problem.key) for problem in rig_problems_of(tmp_path, rig, chemistry)]
    assert found == [("sites-missing", "columns[COL].packing.active_sites")]


def test_the_packing_retains_what_the_chemistry_knows(tmp_path: Path) -> None:
    rig = edited(RIG, *within("COL", 'mass = "1.1 g"', 'mass = "1.1 g", retention = { acid = 0.5 }'))
    found = [(problem.code, problem.key) for problem in rig_problems_of(tmp_path, rig)]
    assert found == [("species-unknown", "columns[COL].packing.retention.acid")]
