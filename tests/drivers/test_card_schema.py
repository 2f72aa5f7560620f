"""The published JSON Schema of protocol cards: current, and accepting every card here."""

from __future__ import annotations

import json
import tomllib
from importlib.resources import files
from pathlib import Path

import pytest
from fakes.config_files import CONFIGS
from jsonschema import Draft202012Validator

from rigd.config.schema import published
from rigd_drivers.card import FAMILY

SCHEMA = published(FAMILY.options_schema("card file"), "protocol card")
TEMPLATES = Path(str(files("rigd_drivers.card"))) / "templates"
CARDS = [
    *TEMPLATES.glob("*.toml"),
    *(CONFIGS / "cards").glob("*.toml"),
    *Path(__file__).parents[1].glob("cards/*.toml"),
]


def test_the_shipped_schema_is_current() -> None:
    """When this fails: ``rigd schema card > configs/schema/card.schema.json``."""
    assert json.loads((CONFIGS / "schema/card.schema.json").read_text(encoding="utf-8")) == SCHEMA


@pytest.mark.parametrize("path", CARDS, ids=lambda path: path.name)
def test_every_card_is_accepted(path: Path) -> None:
    said = tomllib.loads(path.read_text(encoding="utf-8"))
    assert not [error.message for error in Draft202012Validator(SCHEMA).iter_errors(said)]


def test_a_misspelt_key_is_not() -> None:
    said = tomllib.loads((CONFIGS / "cards/map-valve.toml").read_text(encoding="utf-8"))
    said["registers"]["beat"]["adress"] = 1
    assert not Draft202012Validator(SCHEMA).is_valid(said)
