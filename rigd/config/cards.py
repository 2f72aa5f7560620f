"""Protocol cards that a rig file names: found beside it, part of its fingerprint, and of the settings of its links.

What a card means is its driver's business; here only its file is read.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rigd.config.digest import with_cards
from rigd.config.files import RigFile

PORT_SETTINGS = ("baud", "data_bits", "parity", "stop_bits")


def take_cards(file: RigFile, folder: Path, digest: str) -> tuple[RigFile, str]:
    """The rig file with its cards found (relative to ``folder``), and the digest with what they say.

    Port settings that a link leaves out are those of the first card on it; what the rig file says wins.
    """
    said: dict[str, Mapping[str, Any]] = {}
    for device in file.devices:
        if isinstance(name := device.options.get("card"), str):
            path = str((folder / name).absolute())
            device.options["card"] = path
            said[device.id] = _tables(Path(path))
    settings: dict[str, Mapping[str, Any]] = {}
    for device in file.devices:
        link = said.get(device.id, {}).get("link")
        if isinstance(link, dict):
            settings.setdefault(device.link, link)
    links = tuple(
        link.model_copy(update=_left_out(settings.get(link.id, {}), link.model_fields_set)) for link in file.links
    )
    return file.model_copy(update={"links": links}), with_cards(digest, said.values())


def _left_out(card: Mapping[str, Any], written: set[str]) -> dict[str, Any]:
    return {key: card[key] for key in PORT_SETTINGS if key in card and key not in written}


def _tables(path: Path) -> Mapping[str, Any]:
    """What a card says; nothing when it cannot be read, which its driver tells."""
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {}
