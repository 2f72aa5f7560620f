"""The published JSON Schemas: current, accepting every example, refusing what the loader refuses for structure."""

from __future__ import annotations

import datetime
import json
import tomllib
from pathlib import Path
from typing import Any

import pytest
from fakes.config_files import CHEMISTRY, CONFIGS, RECIPE, RIG, Edit, edited, problems_of, within
from jsonschema import Draft202012Validator

from rigd.config import chemistry_schema, recipe_schema, rig_schema, schema_files

SCHEMAS = {"rigs": rig_schema(), "recipes": recipe_schema(), "chemistry": chemistry_schema()}


def as_json(text: str) -> Any:
    """A TOML text as JSON values, as an editor hands them to its validator."""

    def plain(value: Any) -> Any:
        if isinstance(value, dict):
            return {key: plain(item) for key, item in value.items()}
        if isinstance(value, list):
            return [plain(item) for item in value]
        return value.isoformat() if isinstance(value, datetime.datetime) else value

    return plain(tomllib.loads(text))


def accepted(folder: str, text: str) -> bool:
    return Draft202012Validator(SCHEMAS[folder]).is_valid(as_json(text))


def test_shipped_schemas_are_current() -> None:
    """When this fails, write ``rigd.config.schema_files()`` into configs/schema anew."""
    shipped = {path.name: path.read_text(encoding="utf-8") for path in (CONFIGS / "schema").iterdir()}

    del shipped["card.schema.json"]  # of a plug-in: tests/drivers/test_card_schema.py
    assert shipped == schema_files()


@pytest.mark.parametrize("folder", SCHEMAS)
def test_schemas_are_valid_themselves(folder: str) -> None:
    Draft202012Validator.check_schema(SCHEMAS[folder])
    assert '"null"' not in json.dumps(SCHEMAS[folder])


@pytest.mark.parametrize(
    "path",
    [path for folder in SCHEMAS for path in sorted((CONFIGS / folder).glob("*.toml"))],
    ids=lambda path: path.stem,
)
def test_every_example_is_accepted(path: Path) -> None:
    validator = Draft202012Validator(SCHEMAS[path.parent.name])

    assert not [error.message for error in validator.iter_errors(as_json(path.read_text(encoding="utf-8")))]
    assert path.read_text(encoding="utf-8").startswith("#:schema ../schema/")


RIG_FAULTS: tuple[tuple[Edit, ...], ...] = (
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "5"'),
    within("PU-A", 'rate_max = "5 mL/min"', "rate_max = 5"),
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "5 bar"'),
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "-5 mL/min"'),
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "0 mL/min"'),
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "five mL/min"'),
    within("PU-A", 'rate_max = "5 mL/min"', 'rate_max = "5 mL/min"\nrate_mean = "1 mL/min"'),
    within("PU-A", 'rate_max = "5 mL/min"\n', ""),
    within("PU-A", "syringes = 2", "syringes = 3"),
    within("PU-A", "syringes = 2", 'syringes = "2"'),
    within("PU-A", 'id = "PU-A"', 'id = "PU A"'),
    within("V-A", '["solvent", "reagent"]', '["solvent"]'),
    within("V-A", '["solvent", "reagent"]', '"solvent"'),
    within("CH", '["-10 degC", "95 degC"]', '["-10 degC"]'),
    within("CH", '["-10 degC", "95 degC"]', '["-10 degC", "95 degC", "100 degC"]'),
    within("waste", 'role = "waste"', 'role = "sink"'),
    within("solvent", '{ ethanol = "17.0 mol/L" }', "{}"),
    within("COL", "catalyst = true", 'catalyst = "yes"'),
    within("L-1", 'from = "TEE"', 'from = "TEE out"'),
    within("L-1", 'from = "TEE"', "from = 1"),
    within("PT-1", '["0 bar", "25 bar"]', '["0 K", "25 K"]'),
    within("PT-1", 'span = ["0 bar", "25 bar"]\n', ""),
    within("PT-1", 'span = ["0 bar", "25 bar"]', 'labels = ["low", "high"]'),
    within("PT-1", 'measures = "pressure"', 'measures = "state"'),
    within("PT-1", 'measures = "pressure"', 'measures = "presure"'),
    within("PT-1", '"10 mbar"', '"10 K"'),
    within("TT-1", '"0.05 K"', '"0.05 degC"'),
    within("BED-HOT", 'above = "75 degC"', 'above = "75 degC", below = "0 degC"'),
    within("BED-HOT", ', above = "75 degC"', ""),
    within("BED-HOT", 'above = "75 degC"', 'above = "75"'),
    within("JACKET-ADRIFT", ', by = "6 K"', ""),
    within("BED-HOT", 'above = "75 degC"', 'above = "75 degC", by = "1 K"'),
    within("BED-HOT", 'above = "75 degC"', 'above = "75 degC", window = "1 s"'),
    within("BED-HOT", 'vote = "1oo1"', 'vote = "one of one"'),
    within("BED-HOT", 'stop = "quench"', 'stop = "pause"'),
    within("BED-HOT", 'response = "Watch the flush; check the chiller and the bed before a new start."\n', ""),
    within("FLASK-NEARLY-FULL", 'action = "Exchange the flask at the next hold."', 'action = ""'),
    within("bus-1", '"115200 baud"', '"115200"'),
    within("bus-1", 'port = "simulated"', 'port = ""'),
    (('schema = "rigd-rig-1"', 'schema = "rigd-rig-2"'),),
    (('name = "two-pump-column"\n', ""),),
    (("[simulation]\nseed = 7", "[simulation]\nseed = -7"),),
    (('ambient = "22 degC"', 'ambient = "22 K"'),),
)
RECIPE_FAULTS: tuple[tuple[Edit, ...], ...] = (
    (("volumes = 1.5", 'volumes = "1.5"'),),
    (("volumes = 1.5", "volumes = 0"),),
    (("stagnation_safe = true", "stagnation_safe = 1"),),
    (("gas_evolution = false\n", ""),),
    (('order = "descending"', 'order = "down"'),),
    (("count = 6", "count = 1"),),
    (("count = 6", "cuont = 6"),),
    (("ratio = { PU-A = 1, PU-B = 1 }", "ratio = { PU-A = 1, PU-B = 0 }"),),
    (("ratio = { PU-A = 1, PU-B = 1 }", "ratio = []"),),
    (("ratio = { PU-A = 1, PU-B = 1 }", 'residence_time = "1 min"'),),
    (('volume = "0.5 mL"', 'volume = "0.5 min"'),),
    (("persistence = 3", "persistence = 0"),),
    (('[park]\ntemperature = "20 degC"\n', "[park]\n"),),
    (
        (
            "[sheet]",
            '[permit]\napproved_by = "a"\nnumber = "1"\ncontacts = ["one"]\nend = 2035-01-01T00:00:00Z\n\n[sheet]',
        ),
    ),
)
CHEMISTRY_FAULTS: tuple[tuple[Edit, ...], ...] = (
    (('law = "reversible"', 'law = "zeroth"'),),
    (('activation_energy = "58 kJ/mol"', 'activation_energy = "58 kJ"'),),
    (('heat = "-4.5 kJ/mol"', "heat = -4.5"),),
    (('id = "water"', 'id = "water/2"'),),
    (('product = "ethyl acetate"\n', ""),),
    (('rate_constant = "0.001625 L/(mol s)"', "rate_constant = 0.001625"),),
)


@pytest.mark.parametrize("fault", RIG_FAULTS, ids=range(len(RIG_FAULTS)))
def test_what_the_loader_refuses_in_a_rig_the_schema_refuses(fault: tuple[Edit, ...], tmp_path: Path) -> None:
    text = edited(RIG, *fault)

    assert problems_of(tmp_path, rig=text)
    assert not accepted("rigs", text)


@pytest.mark.parametrize("fault", RECIPE_FAULTS, ids=range(len(RECIPE_FAULTS)))
def test_what_the_loader_refuses_in_a_recipe_the_schema_refuses(fault: tuple[Edit, ...], tmp_path: Path) -> None:
    text = edited(RECIPE, *fault)

    assert problems_of(tmp_path, recipe=text)
    assert not accepted("recipes", text)


@pytest.mark.parametrize("fault", CHEMISTRY_FAULTS, ids=range(len(CHEMISTRY_FAULTS)))
def test_what_the_loader_refuses_in_a_chemistry_the_schema_refuses(fault: tuple[Edit, ...], tmp_path: Path) -> None:
    text = edited(CHEMISTRY, *fault)

    assert problems_of(tmp_path, chemistry=text)
    assert not accepted("chemistry", text)


def test_defaults_are_written_as_a_person_would() -> None:
    """An editor may insert a default: it must be accepted where it is offered."""
    definitions = rig_schema()["$defs"]
    assert definitions["PumpTable"]["properties"]["compliance"]["default"] == "0.01 mL/bar"
    for name, table in definitions.items():
        for key, schema in table.get("properties", {}).items():
            if "default" in schema and "$ref" not in schema:
                validator = Draft202012Validator({**schema, "$defs": definitions})
                assert validator.is_valid(schema["default"]), (name, key)
