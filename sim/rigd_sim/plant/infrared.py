"""The IR flow cell: mean composition over each acquisition, turned into a spectrum when somebody asks.

A(nu) = path sum_i c_i eps_i(nu)  (Beer-Lambert), eps a sum of Lorentzian bands: eps0 / (1 + (2 (nu - nu0)/w)^2).
Stray light s limits the reading: A' = -log10((10^-A + s)/(1 + s)). White noise, and a base line that
wanders slowly (random walk).
"""

from __future__ import annotations

import math

import numpy as np

from rigd.model.chemistry import Chemistry
from rigd.model.rig import Cell
from rigd.model.samples import Spectrum
from rigd_sim.physics.compiled import Floats
from rigd_sim.plant.levers import CellLever

START_PER_CM, STEP_PER_CM, POINTS = 860.0, 4.0, 236
NOISE_AU = 2e-4
WANDER_AU_PER_ROOT_H = 1e-3
STRAY_LIGHT = 1e-4
GRID = START_PER_CM + STEP_PER_CM * np.arange(POINTS)


def absorptivity(chemistry: Chemistry, shift_per_cm: float = 0.0) -> Floats:
    """Molar absorptivity of each species on the grid [m2/mol], decadic: 1 L/(mol cm) = 0.1 m2/mol."""
    table = np.zeros((len(chemistry.species), POINTS))
    for i, species in enumerate(chemistry.species):
        for band in species.bands:
            x = 2.0 * (GRID - band.centre_per_cm - shift_per_cm) / band.width_per_cm
            table[i] += 0.1 * band.absorptivity / (1.0 + x * x)
    return table


class InfraredUnit:
    """One cell. ``expose`` is called for every transport step; a spectrum is finished every period."""

    def __init__(self, cell: Cell, chemistry: Chemistry, seed: int) -> None:
        self.cell = cell
        self._chemistry = chemistry
        self._table = absorptivity(chemistry)
        self._species = len(chemistry.species)
        self._random = np.random.default_rng([seed, 4711])
        self._sum = np.zeros(self._species)
        self._gas = 0.0
        self._time = 0.0
        self._wander = 0.0
        self.mean: Floats | None = None
        self.mean_gas = 0.0
        self.finished_ns = 0
        self.count = 0
        self._made = -1
        self._spectrum: Spectrum | None = None

    @property
    def next_ns(self) -> int:
        """When the acquisition that runs now will end."""
        return self.finished_ns + self.cell.period_ns

    def expose(self, composition: Floats, gas: float, dt: float, now_ns: int, lever: CellLever) -> None:
        """Add ``dt`` seconds of this composition; finish the spectrum when its time is over."""
        self._sum += composition[: self._species] * dt
        self._gas += gas * dt
        self._time += dt
        if now_ns < self.next_ns or self._time <= 0.0:
            return
        if not lever.frozen:
            self.mean, self.mean_gas = self._sum / self._time, self._gas / self._time
            self.count += 1
        self._wander += WANDER_AU_PER_ROOT_H * math.sqrt(self._time / 3600.0) * float(self._random.standard_normal())
        self.finished_ns = self.next_ns
        self._sum[:] = 0.0
        self._gas = self._time = 0.0

    def spectrum(self, lever: CellLever) -> Spectrum:
        """The last finished spectrum, the same one until the next is finished; without points before the first."""
        if self.mean is None:
            return Spectrum(self.cell.device, 0, START_PER_CM, STEP_PER_CM, ())
        if self._made != self.count or self._spectrum is None:
            self._spectrum, self._made = self._make(self.mean, lever), self.count
        return self._spectrum

    def _make(self, mean: Floats, lever: CellLever) -> Spectrum:
        table = absorptivity(self._chemistry, lever.shift) if lever.shift else self._table
        pure = (mean @ table) * self.cell.path_um * 1e-6
        stray = STRAY_LIGHT + lever.stray
        seen = -np.log10((10.0**-pure + stray) / (1.0 + stray))
        x = (GRID - 1300.0) / 500.0
        seen += self._wander + lever.offset + lever.slope * x
        seen += lever.film / (1.0 + ((GRID - 1000.0) / 120.0) ** 2)
        bubble = self.mean_gas
        if bubble > 0.0:  # a bubble in the beam: part of the path is empty, the rest scatters
            seen += min(bubble, 1.0) * (0.3 * float(self._random.random()) + 0.1 - 0.8 * seen)
        seen += NOISE_AU * lever.noise * self._random.standard_normal(POINTS)
        return Spectrum(
            self.cell.device, self.finished_ns, START_PER_CM, STEP_PER_CM, tuple(np.round(seen, 4).tolist())
        )
