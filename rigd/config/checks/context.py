"""What the checks of a rig file look at, and where to point when something is wrong."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.config.files import RigFile
from rigd.config.findings import Findings
from rigd.config.lines import Path
from rigd.config.pressure_side import PressureSide
from rigd.config.structure import declared
from rigd.config.table import Table
from rigd.model.rig import RigDefinition

PART_SECTIONS = ("vessels", "valves", "pumps", "tees", "columns", "cells", "regulators", "reliefs", "chillers")


@dataclass(frozen=True)
class RigContext:
    """A rig file, the rig made of it as far as it parsed, the species that exist, and the findings so far."""

    file: RigFile
    rig: RigDefinition
    sides: tuple[PressureSide, ...]
    species: frozenset[str]
    found: Findings
    _places: dict[tuple[str, str], Path] = field(default_factory=dict)

    def at(self, section: str, name: str, *keys: str | int) -> Path:
        """Path of a key of the item called ``name``; of the section when there is no such item."""
        if not self._places:
            for key in type(self.file).model_fields:
                rows = getattr(self.file, key)
                for row in rows if isinstance(rows, tuple) else ():
                    if isinstance(row, Table):
                        self._places.setdefault((key, _name(row)), row.key_path)
        place = self._places.get((section, name))
        return (*place, *keys) if place else (section,)

    def names(self, section: str) -> frozenset[str]:
        """Ids that a section declares, also in tables that have findings of their own."""
        return declared(self.found.source, section)

    def parts(self) -> Mapping[str, str]:
        """Section of every declared part (not lines, not liquids)."""
        return {name: section for section in PART_SECTIONS for name in self.names(section)}

    def whole(self, *sections: str) -> bool:
        """True when no table of these sections had to be left out."""
        source = self.found.source
        for section in sections:
            rows = source.data.get(section, [])
            if not isinstance(rows, list) or len(rows) != len(getattr(self.file, section)):
                return False
        return True


def _name(row: Table) -> str:
    return str(getattr(row, "id", "") or getattr(row, "tag", "") or getattr(row, "name", ""))
