"""A look before the first night: do the files fit together with the varied numbers at their middle?"""

from __future__ import annotations

import tempfile
from pathlib import Path

from rigd.adapters.plugins import plant_maker
from rigd.config.load import load_pair
from rigd.config.varied import Nights, as_first_written, shown_with
from rigd.model.errors import ConfigError
from rigd.nights.night import write_files
from rigd.ports.plant import FaultSpec


def check(nights: Nights) -> dict[str, str]:
    """Units of the rig's tags. Raises ``ConfigError`` when rig, recipe or a fault is wrong from the start."""
    with tempfile.TemporaryDirectory(prefix="rigd-night-") as folder:
        rig, recipe = write_files(Path(folder), nights.with_numbers(as_first_written(nights)))
        try:
            pair = load_pair(rig, recipe)
        except ConfigError as error:
            names = {"rig.toml": str(nights.rig_path), "recipe.toml": str(nights.recipe_path)}
            raise shown_with(error, {**names, "chemistry.toml": "the chemistry file"}) from error
    if nights.faults:
        plant = plant_maker().make(pair.rig, 1)
        for fault in nights.faults:
            plant.inject(FaultSpec(fault.kind, fault.target, onset_s=fault.at_s[1], magnitude=fault.size[1]))
    return {tag.id: tag.unit for tag in pair.rig.tags}
