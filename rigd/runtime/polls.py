"""What is read from which device and how often, and how a reading becomes a sample."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigd.model.devices import DeviceSpec
from rigd.model.rig import Cell, RigDefinition
from rigd.model.samples import Quality, QualityCause, Reading, Sample


@dataclass(frozen=True, slots=True)
class Poll:
    """Channels of one device that are read together; ``tags`` maps channel to tag. ``spectrum``: read a spectrum and
    derive the channels from it."""

    device: str
    channels: tuple[str, ...]
    tags: Mapping[str, str]
    period_ns: int
    spectrum: bool = False


def polls_of(rig: RigDefinition, device: DeviceSpec) -> tuple[Poll, ...]:
    """One poll per period, shortest first, then the spectra of the cells that the device reads."""
    polls = []
    for period_ns in sorted({channel.period_ns for channel in device.channels}):
        tags = {channel.channel: channel.tag for channel in device.channels if channel.period_ns == period_ns}
        polls.append(Poll(device.id, tuple(tags), tags, period_ns))
    return (*polls, *(spectral_poll(rig, cell) for cell in rig.cells if cell.device == device.id))


def spectral_poll(rig: RigDefinition, cell: Cell) -> Poll:
    """The poll of a cell; its channels are what is derived: species, ``conversion``, ``residual``. Twice per spectrum,
    because the instrument's clock is not ours."""
    head = f"{cell.id}."
    tags = {tag.id.removeprefix(head): tag.id for tag in rig.tags if tag.id.startswith(head) and not tag.channel}
    return Poll(cell.device, tuple(tags), tags, cell.period_ns // 2, spectrum=True)


def samples_of(poll: Poll, readings: Iterable[Reading], t_ns: int) -> list[Sample]:
    """Samples of the readings that have a tag, acquired at ``t_ns``."""
    return [
        sample_of(reading, poll.tags[reading.channel], t_ns) for reading in readings if reading.channel in poll.tags
    ]


def sample_of(reading: Reading, tag: str, t_ns: int) -> Sample:
    """A reading under its tag; a fault that the device itself told, or a value that is no number, makes it bad."""
    value = reading.value + 0.0  # minus zero becomes zero, which is all that a journal can hold
    if reading.fault:
        return Sample(tag, value, t_ns, Quality.BAD, QualityCause.SENSOR_FAULT, reading.raw)
    if math.isnan(value):
        return Sample(tag, value, t_ns, Quality.BAD, QualityCause.NOT_A_NUMBER, reading.raw)
    return Sample(tag, value, t_ns, raw=reading.raw)


def next_due_ns(start_ns: int, period_ns: int, now_ns: int) -> int:
    """The first ``start + k * period`` after ``now``: missed turns are left out, never made up for in a burst."""
    return start_ns + ((now_ns - start_ns) // period_ns + 1) * period_ns
