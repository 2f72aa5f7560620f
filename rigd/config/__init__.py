"""Files that people write (rig, chemistry, recipe) -> ``rigd.model`` values, or every problem with file, line and key.

Reads files and nothing else; never prints, opens no device, and decides nothing about a run.
"""

from rigd.config.load import Pair, load_pair, load_recipe, load_rig, read_rig
from rigd.config.schema import chemistry_schema, recipe_schema, rig_schema, schema_files

__all__ = [
    "Pair",
    "chemistry_schema",
    "load_pair",
    "load_recipe",
    "load_rig",
    "read_rig",
    "recipe_schema",
    "rig_schema",
    "schema_files",
]
