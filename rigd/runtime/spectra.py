"""Spectra become derived readings here, outside the core: so that a replay needs no numerics (decision 1)."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from rigd.model.chemistry import Chemistry
from rigd.model.events import Event
from rigd.model.recipe import Recipe
from rigd.model.rig import Cell, RigDefinition
from rigd.model.samples import Reading, Spectrum
from rigd.runtime.polls import spectral_poll
from rigd.runtime.references import References

if TYPE_CHECKING:
    from rigd.analysis.unmix import Unmixer

CONVERSION, RESIDUAL = "conversion", "residual"


class CellReader:
    """Un-mixes the spectra of one cell. ``channels`` is what is wanted: species, ``conversion``, ``residual``. Calling
    it with a spectrum gives the readings."""

    def __init__(self, cell: Cell, chemistry: Chemistry, channels: Sequence[str], references: References) -> None:
        self._cell, self._chemistry, self._channels, self.references = cell, chemistry, channels, references
        from rigd.analysis.unmix import Unmixer  # numpy: only for a rig with a cell, and not while scans wait for it

        self._make = Unmixer
        self._species = [one.id for one in chemistry.species if one.bands and one.id in channels]
        self._unmixer: Unmixer | None = None
        self._grid: tuple[float, float, int] = (0.0, 0.0, 0)

    def __call__(self, spectrum: Spectrum) -> Sequence[Reading]:
        """Readings of all wanted channels; with the words of the trouble as ``fault`` when there are none to be had."""
        self.references.see(spectrum)
        try:
            result = self._unmixer_for(spectrum).solve(spectrum.absorbance)
        except ValueError as error:
            return [Reading(channel, float("nan"), fault=str(error)) for channel in self._channels]
        found = {**result.concentrations, CONVERSION: result.conversion, RESIDUAL: result.residual_AU}
        return [Reading(channel, found[channel]) for channel in self._channels if channel in found]

    def hear(self, events: Sequence[Event]) -> None:
        """What happened in the run: from a new reference on, the next spectra are un-mixed with it."""
        if self.references.hear(events):
            self._unmixer = None

    def keep(self, taken: Callable[[Spectrum], None]) -> None:
        """Hand each reference to ``taken`` (the journal)."""
        self.references.taken = taken

    def _unmixer_for(self, spectrum: Spectrum) -> Unmixer:
        grid = (spectrum.start_per_cm, spectrum.step_per_cm, len(spectrum.absorbance))
        if self._unmixer is None or grid != self._grid:
            self._grid = grid
            self._unmixer = self._make(self._chemistry, self._species, *grid, self._cell.path_um)
            if self.references.found:
                measured = self.references.library(self._unmixer.drawn)
                self._unmixer = self._make(self._chemistry, self._species, *grid, self._cell.path_um, measured)
        return self._unmixer


def cell_readers(rig: RigDefinition, recipe: Recipe | None = None) -> dict[str, CellReader]:
    """Device id -> reader, for every cell of the rig that has a device; ``recipe`` says which references are taken."""
    return {
        cell.device: CellReader(cell, rig.chemistry, spectral_poll(rig, cell).channels, References(cell, rig, recipe))
        for cell in rig.cells
        if cell.device
    }
