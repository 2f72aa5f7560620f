"""Reference spectra of one cell, taken while the recipe runs: the solvent at the end of conditioning, a feed when a
person signs that the cell was filled with it. Kept in the journal under ``<cell>: reference <liquid>``."""

from __future__ import annotations

import logging
from collections import deque
from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING

from rigd.model.events import Event, EventKind
from rigd.model.recipe import Recipe
from rigd.model.rig import Cell, LiquidRole, RigDefinition
from rigd.model.samples import Spectrum

if TYPE_CHECKING:
    from rigd.analysis.references import Array, Reference

CONDITIONING = "conditioning"
_LOG = logging.getLogger(__name__)


class References:
    """Listens to the run and keeps what the recipe asks for. ``taken`` is handed each reference as a spectrum."""

    def __init__(self, cell: Cell, rig: RigDefinition, recipe: Recipe | None) -> None:
        wanted = recipe.references if recipe is not None else None
        self._cell, self._liquids = cell, {liquid.id: liquid for liquid in rig.liquids}
        self._solvent = next((one.id for one in rig.liquids if one.role is LiquidRole.SOLVENT), "")
        items = recipe.checklist if recipe is not None and wanted is not None else ()
        self._signed = {item.id: item.reference for item in items if item.reference}
        self._last: deque[Spectrum] = deque(maxlen=wanted.spectra if wanted is not None else 0)
        self._conditioning = False
        self.found: dict[str, Reference] = {}
        self.taken: Callable[[Spectrum], None] = lambda spectrum: None

    def see(self, spectrum: Spectrum) -> None:
        """A new spectrum of the cell; another grid makes what was seen before useless."""
        if self._last and _grid(self._last[-1]) != _grid(spectrum):
            self._last.clear()
            self.found.clear()
        self._last.append(spectrum)

    def hear(self, events: Sequence[Event]) -> bool:
        """What happened; True when there is a new reference."""
        before = dict(self.found)
        for event in events:
            if event.kind is EventKind.PHASE:
                if self._conditioning and event.subject != CONDITIONING:
                    self._take(self._solvent)
                self._conditioning = event.subject == CONDITIONING
            elif event.kind is EventKind.PROMPT and event.fields.get("status") == "confirmed":
                self._take(self._signed.get(event.subject, ""))
        return self.found != before

    def library(self, drawn: Mapping[str, Array]) -> dict[str, Array]:
        """The library [AU per mol/L] with the references that look like their liquids."""
        from rigd.analysis.references import ALIKE_LEAST, likeness, measured_library

        alike = []
        for one in self.found.values():
            found = likeness(one, drawn)
            if found >= ALIKE_LEAST:
                alike.append(one)
            else:
                _LOG.warning(
                    "%s: the reference does not look like %s (%.2f); not used", self._cell.id, one.liquid, found
                )
        return measured_library(alike, drawn) if alike else dict(drawn)

    def _take(self, liquid: str) -> None:
        from rigd.analysis.references import Reference, mean_of

        if not self._last.maxlen or liquid not in self._liquids:
            return
        if len(self._last) < self._last.maxlen:
            _LOG.warning("%s: no reference of %s: %d spectra so far", self._cell.id, liquid, len(self._last))
            return
        try:
            mean = mean_of([one.absorbance for one in self._last])
        except ValueError as error:
            _LOG.warning("%s: no reference of %s: %s", self._cell.id, liquid, error)
            return
        self.found[liquid] = Reference(liquid, self._liquids[liquid].composition_mol_L, mean)
        last = self._last[-1]
        source = f"{self._cell.id}: reference {liquid}"
        self.taken(Spectrum(source, last.t_ns, last.start_per_cm, last.step_per_cm, tuple(map(float, mean))))


def _grid(spectrum: Spectrum) -> tuple[float, float, int]:
    return spectrum.start_per_cm, spectrum.step_per_cm, len(spectrum.absorbance)
