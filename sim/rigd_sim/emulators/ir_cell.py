"""IR flow cell FC1 (sim/MANUAL.md, 1.4)."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

from rigd.model.devices import DeviceSpec
from rigd.model.rig import Cell
from rigd.model.samples import Spectrum
from rigd.ports.plant import Plant
from rigd_sim.emulators.device import NO_ARGUMENTS, BracketDevice
from rigd_sim.emulators.numbers import fixed

AU_PER_COUNT = 1e-4
_LOW, _HIGH = -0x8000, 0x7FFF


@dataclass(frozen=True, slots=True)
class Grid:
    """Wavenumbers of a spectrum: how many, the first and the step [1/cm]."""

    points: int
    start_per_cm: float
    step_per_cm: float


class IrCell(BracketDevice):
    """A spectrometer that measures without being asked, one spectrum per period.

    The plant numbers nothing; spectra are counted by the time at which they were finished.
    """

    model = "FC1"
    commands = frozenset({"silence"})

    def __init__(self, spec: DeviceSpec, plant: Plant, cell: Cell, grid: Grid, pace: float = 1.0) -> None:
        super().__init__(spec, plant, pace)
        self._period_ns = cell.period_ns
        self._grid = grid
        self._since_ns = 0
        self._shown: tuple[int, str] = (-1, "")

    @property
    def own(self) -> Mapping[str, Callable[[Sequence[str]], str]]:
        """Requests of the cell."""
        return {"grid?": self._grid_words, "count?": self._count_words, "spectrum?": self._data_words}

    def power_cycle(self, now_s: float, off_s: float) -> None:
        """The counter starts anew; the first spectrum after that begins when the power is back."""
        super().power_cycle(now_s, off_s)
        self._since_ns = round((now_s + off_s) * 1e9)

    def _last(self) -> Spectrum | None:
        try:
            return self.plant.spectrum(self.spec.id)
        except LookupError:
            return None

    def _count(self, spectrum: Spectrum | None) -> int:
        return max(0, (spectrum.t_ns - self._since_ns) // self._period_ns) if spectrum else 0

    def _grid_words(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        grid = self._grid
        span = f"from={fixed(grid.start_per_cm, 1)} step={fixed(grid.step_per_cm, 1)}"
        return f"ok n={grid.points} {span} every={fixed(self._period_ns / 1e9, 1)}"

    def _count_words(self, words: Sequence[str]) -> str:
        return NO_ARGUMENTS if words else f"ok count={self._count(self._last())}"

    def _data_words(self, words: Sequence[str]) -> str:
        if words:
            return NO_ARGUMENTS
        spectrum = self._last()
        count = self._count(spectrum)
        if spectrum is None or count == 0:
            return "no state none finished yet"
        age_s = max(0.0, self.now_s - spectrum.t_ns / 1e9)
        return f"ok count={count} age={fixed(age_s, 1)} data={self._data(spectrum)}"

    def _data(self, spectrum: Spectrum) -> str:
        """The points as hexadecimal text; kept, because a cell is asked more often than it measures."""
        if self._shown[0] != spectrum.t_ns:
            self._shown = (spectrum.t_ns, "".join(_point(value) for value in spectrum.absorbance))
        return self._shown[1]


def _point(absorbance_AU: float) -> str:
    """One point in two's complement; beyond the converter it stays at its end."""
    count = round(absorbance_AU / AU_PER_COUNT) if math.isfinite(absorbance_AU) else _HIGH
    return f"{min(_HIGH, max(_LOW, count)) & 0xFFFF:04X}"
