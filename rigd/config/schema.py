"""JSON Schemas of the files that people write, so that editors can complete and check them.

The schemas say what the structure is; what it must mean (references, limits, volumes) only the loader knows.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from rigd.config.chemistry_tables import ChemistryFile
from rigd.config.files import RecipeFile, RigFile
from rigd.config.nights_tables import NightsFile
from rigd.config.quantity import HOUSE_UNIT
from rigd.config.table import Table

DRAFT = "https://json-schema.org/draft/2020-12/schema"

Schema = dict[str, Any]


def rig_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a rig file."""
    return _schema(RigFile, "rig file")


def recipe_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a recipe file."""
    return _schema(RecipeFile, "recipe file")


def chemistry_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a chemistry file."""
    return _schema(ChemistryFile, "chemistry file")


def nights_schema() -> Schema:
    """JSON Schema (draft 2020-12) of a nights file."""
    return _schema(NightsFile, "nights file")


def published(made: Mapping[str, Any], title: str) -> Schema:
    """A schema that a plug-in made (of a protocol card, for one) in the form in which all of them are published."""
    return {"$schema": DRAFT, **_plain(dict(made)), "title": title}


def schema_files() -> dict[str, str]:
    """File name -> text of the schemas as they are shipped in configs/schema."""
    schemas = {
        "rig": rig_schema(),
        "recipe": recipe_schema(),
        "chemistry": chemistry_schema(),
        "nights": nights_schema(),
    }
    return {f"{name}.schema.json": json.dumps(schema, indent=1) + "\n" for name, schema in schemas.items()}


def _schema(model: type[Table], title: str) -> Schema:
    return published(model.model_json_schema(by_alias=True, mode="validation"), title)


def _plain(node: Any) -> Any:
    """As TOML is: no null; keys that people choose must fit their pattern; no titles made of field names."""
    if isinstance(node, list):
        return [_plain(item) for item in node]
    if not isinstance(node, dict):
        return node
    plain = {key: _children(key, value) for key, value in node.items() if not _noise(key, value)}
    kinds = plain.get("anyOf")
    if isinstance(kinds, list):
        kinds = [kind for kind in kinds if kind != {"type": "null"}]
        if len(kinds) == 1:
            del plain["anyOf"]
            plain = {**kinds[0], **plain}
        else:
            plain["anyOf"] = kinds
    unit = plain.pop(HOUSE_UNIT, None)
    if unit is not None and isinstance(plain.get("default"), float):
        plain["default"] = f"{plain['default']:g} {unit}"  # as a person writes it
    if "patternProperties" in plain:
        plain.setdefault("additionalProperties", False)
    return plain


def _children(key: str, value: Any) -> Any:
    if key in ("properties", "$defs", "patternProperties") and isinstance(value, dict):
        return {name: _plain(child) for name, child in value.items()}
    return value if key in ("default", "enum", "const") else _plain(value)


def _noise(key: str, value: Any) -> bool:
    return (key == "default" and value is None) or (key == "title" and isinstance(value, str))
