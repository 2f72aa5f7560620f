"""Instruments that show something else than what is."""

from __future__ import annotations

import math

from rigd_sim.faults import targets
from rigd_sim.faults.build import effect
from rigd_sim.plant.ailments import Situation
from rigd_sim.plant.levers import CellLever, Levers, SensorLever

HOUR_S = 3600.0


def _sensor(levers: Levers, situation: Situation) -> SensorLever:
    return levers.sensor(situation.fault.target)


def _cell(levers: Levers, situation: Situation) -> CellLever:
    return levers.cell(situation.fault.target)


def _frozen(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).frozen = True


def _offset(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).offset += situation.fault.magnitude


def _drift(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).offset += situation.fault.magnitude * situation.elapsed_s / HOUR_S


def _gain(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).gain *= situation.fault.magnitude


def _noisy(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).noise *= situation.fault.magnitude


def _spikes(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).spikes = situation.fault.magnitude


def _open(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).is_open = True


def _beyond(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).beyond = int(math.copysign(1.0, situation.fault.magnitude))


def _shorted(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).loose = 1.0


def _detached(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).loose = -math.expm1(-situation.elapsed_s / max(situation.fault.magnitude, 1e-3))


def _mirrored(levers: Levers, situation: Situation) -> None:
    _sensor(levers, situation).mirrored = True


def _ir_drift(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).offset += situation.fault.magnitude * situation.elapsed_s / HOUR_S
    _cell(levers, situation).slope += 0.5 * situation.fault.magnitude * situation.elapsed_s / HOUR_S


def _ir_film(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).film += situation.fault.magnitude * situation.elapsed_s / HOUR_S


def _ir_noise(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).noise *= situation.fault.magnitude


def _ir_frozen(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).frozen = True


def _ir_shift(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).shift += situation.fault.magnitude


def _ir_stray(levers: Levers, situation: Situation) -> None:
    _cell(levers, situation).stray += situation.fault.magnitude


TAG, CELL = "tag of a sensor", "IR cell"

EFFECTS = (
    effect("frozen", "stands still", targets.sensors, TAG, "not used", _frozen, "identical raw code", "H23"),
    effect("offset", "shows too much", targets.sensors, TAG, "offset in its unit", _offset,
           "steady offset, not zero at rest", "H24"),
    effect("drift", "drifts away", targets.sensors, TAG, "drift in its unit per hour", _drift,
           "slow ramp without cause", "H24"),
    effect("gain", "wrong type or scale", targets.sensors, TAG, "shown over true", _gain,
           "wrong in proportion; right only at zero", "H22 H41"),
    effect("noisy", "noise grows", targets.sensors, TAG, "factor on its noise", _noisy,
           "noise 3 to 10 times", "H7 H25"),
    effect("spikes", "single wild values", targets.sensors, TAG, "size in its unit", _spikes,
           "every fifth value off", "H7 H25"),
    effect("open", "broken wire", targets.sensors, TAG, "not used", _open, "reads OPEN", "H19"),
    effect("out-of-span", "beyond the converter", targets.sensors, TAG, "1 above, -1 below", _beyond,
           "reads HIGH or LOW", "H19"),
    effect("shorted", "thermocouple shorted at its head", targets.temperatures, TAG, "not used", _shorted,
           "shows room temperature at once", "H20"),
    effect("detached", "sensor off its place", targets.temperatures, TAG, "time constant [s]", _detached,
           "drifts to room temperature", "H21"),
    effect("mirrored", "wired the wrong way round", targets.temperatures, TAG, "not used", _mirrored,
           "falls when it should rise", "H22"),
    effect("ir-drift", "base line drifts", targets.cells, CELL, "AU per hour", _ir_drift,
           "offset and slope of spectra grow", "H24"),
    effect("ir-film", "film on the window", targets.cells, CELL, "AU per hour", _ir_film,
           "a band of no known species grows, residual up", "H24"),
    effect("ir-noise", "weak lamp", targets.cells, CELL, "factor on noise", _ir_noise, "spectra noisy", "H7"),
    effect("ir-frozen", "no new spectra", targets.cells, CELL, "not used", _ir_frozen,
           "the last spectrum for ever", "H23"),
    effect("ir-shift", "wavenumbers shifted", targets.cells, CELL, "1/cm", _ir_shift, "residual up", "H24"),
    effect("ir-stray", "stray light", targets.cells, CELL, "share of the beam", _ir_stray,
           "strong bands too small", "H24"),
)  # fmt: skip
