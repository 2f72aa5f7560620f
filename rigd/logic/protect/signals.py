"""From samples as they arrive to samples that may be believed: span, age, links, and the recent past of each.

Bad is: what the driver says is bad, what is not a finite number, what lies beyond the span of its instrument, what is
older than its tag allows, what stands still though its instrument is noisy, and everything of a device whose link is
lost. A bad sample stays bad until a good one comes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from rigd.logic.protect.timers import NEVER_NS
from rigd.model.devices import DeviceIdentity, DeviceStatus, LinkState
from rigd.model.rig import Tag, TagKind
from rigd.model.samples import Quality, QualityCause, Sample

if TYPE_CHECKING:
    from rigd.logic.program import Program

RING = 20
"""Samples kept of each interlocked tag, for the record of a trip."""

MARGIN_NS = 1_000_000_000
"""A value at the very end of its span is uncertain for this long, then bad."""

STANDS_STILL = 30
"""So many equal raw codes in a row of a tag with declared noise mean a frozen signal. With a chance p that noise leaves
the code unchanged, k equal codes come by chance with p^(k-1): below 1e-8 for p = 0.5. A pressure shut in is truly
constant, but its noisy instrument is not. Declare no noise for an instrument whose last digit hides it."""

GRACE_NS = 10_000_000_000
"""After the start every device has this long to answer and every tag to be seen. Until then nobody can reset."""

_LARGEST = 1.7976931348623157e308


@dataclass(frozen=True, slots=True)
class Gate:
    """What a value may be. Good within (low, high), bad at or beyond (fail_low, fail_high), uncertain between.

    For measured tags the fractions of NAMUR NE 43 applied to the span: good 3.8 to 20.5 mA, failure at 3.6 and 21.0 mA,
    that is -1.25 % to 103.125 % and -2.5 % or 106.25 % of span. Everything else must only be finite.
    """

    low: float
    high: float
    fail_low: float
    fail_high: float


def gate(tag: Tag) -> Gate:
    """The gate of a tag."""
    if tag.kind is not TagKind.MEASURED:
        return Gate(-_LARGEST, _LARGEST, -math.inf, math.inf)
    span = tag.high - tag.low
    return Gate(tag.low - 0.0125 * span, tag.high + 0.03125 * span, tag.low - 0.025 * span, tag.high + 0.0625 * span)


@dataclass(frozen=True, slots=True)
class Signals:
    """The judged image. ``marginal`` says since when a tag is at the end of its span, ``still`` how many equal codes
    came in a row, ``due_ns`` when to look again."""

    samples: Mapping[str, Sample]
    started_ns: int
    due_ns: int
    marginal: Mapping[str, int] = field(default_factory=dict)
    rings: Mapping[str, tuple[Sample, ...]] = field(default_factory=dict)
    devices: Mapping[str, DeviceStatus] = field(default_factory=dict)
    identities: Mapping[str, DeviceIdentity] = field(default_factory=dict)
    still: Mapping[str, int] = field(default_factory=dict)


def initial(now_ns: int) -> Signals:
    """Nothing seen yet."""
    return Signals({}, now_ns, now_ns)


def take(
    program: Program, signals: Signals, arrived: Sequence[Sample], now_ns: int
) -> tuple[Signals, dict[str, Sample]]:
    """Judge new samples, each tag at most once in ``arrived``; returns what was taken, in order of arrival.

    A sample older than the one in the image is late and is dropped; one of an unknown tag is not ours.
    """
    if not arrived:
        return signals, {}
    samples = dict(signals.samples)
    rings = dict(signals.rings)
    gates, ringed, good, bad, unmarked = program.gates, program.ringed, Quality.GOOD, Quality.BAD, QualityCause.NONE
    marginal: dict[str, int] | None = None
    still = signals.still
    due_ns = signals.due_ns
    taken: dict[str, Sample] = {}
    for sample in arrived:
        tag = sample.tag
        bounds = gates.get(tag)
        if bounds is None:
            continue
        held = samples.get(tag)
        if held is not None and sample.t_ns < held.t_ns:
            continue
        believed = bounds.low <= sample.value <= bounds.high and sample.quality is good and sample.cause is unmarked
        if not believed or sample.t_ns > now_ns or tag in signals.marginal:
            marginal = dict(signals.marginal) if marginal is None else marginal
            sample = _judge(bounds, sample, marginal, now_ns)
            due_ns = min(due_ns, now_ns + MARGIN_NS)
        if tag in program.noisy and held is not None and sample.t_ns > held.t_ns:
            still, sample = _stands_still(still, held, sample)
        if held is None or held.quality is bad:
            due_ns = min(due_ns, sample.t_ns + program.stale_ns.get(tag, NEVER_NS))
        samples[tag] = sample
        taken[tag] = sample
        if tag in ringed:
            rings[tag] = rings.get(tag, ())[1 - RING :] + (sample,)
    if not taken:
        return signals, taken
    return (
        Signals(
            samples,
            signals.started_ns,
            due_ns,
            signals.marginal if marginal is None else marginal,
            rings,
            signals.devices,
            signals.identities,
            still,
        ),
        taken,
    )


def _stands_still(still: Mapping[str, int], held: Sample, sample: Sample) -> tuple[Mapping[str, int], Sample]:
    """Count equal raw codes in a row; from ``STANDS_STILL`` on the sample is bad, until the code moves."""
    tag = sample.tag
    if sample.raw is None or sample.raw != held.raw:
        return ({name: count for name, count in still.items() if name != tag} if tag in still else still), sample
    count = still.get(tag, 1) + 1
    if count >= STANDS_STILL and sample.quality is not Quality.BAD:
        sample = replace(sample, quality=Quality.BAD, cause=QualityCause.FROZEN)
    return {**still, tag: count}, sample


def _judge(bounds: Gate, sample: Sample, marginal: dict[str, int], now_ns: int) -> Sample:
    """The slow path: everything that is not plainly good."""
    if sample.t_ns > now_ns:
        sample = replace(sample, t_ns=now_ns)
    value = sample.value
    if not math.isfinite(value):
        quality, cause = Quality.BAD, QualityCause.NOT_A_NUMBER
    elif value <= bounds.fail_low or value >= bounds.fail_high:
        quality, cause = Quality.BAD, QualityCause.OUT_OF_SPAN
    elif not bounds.low <= value <= bounds.high:
        since_ns = marginal.setdefault(sample.tag, now_ns)
        quality = Quality.BAD if now_ns - since_ns >= MARGIN_NS else Quality.UNCERTAIN
        cause = QualityCause.OUT_OF_SPAN
    else:
        marginal.pop(sample.tag, None)
        quality, cause = Quality.GOOD, QualityCause.NONE
    if sample.cause is QualityCause.SUBSTITUTED:
        quality, cause = Quality.BAD, QualityCause.SUBSTITUTED
    if sample.quality >= quality and sample.cause is not QualityCause.NONE:
        quality, cause = max(sample.quality, quality), sample.cause
    return replace(sample, quality=max(sample.quality, quality), cause=cause)


def link(program: Program, signals: Signals, statuses: Iterable[DeviceStatus]) -> tuple[Signals, dict[str, Sample]]:
    """Take link changes: all tags of a device that is not online are bad until they are read again."""
    devices = dict(signals.devices)
    identities = dict(signals.identities)
    latest: dict[str, DeviceStatus] = {}
    for status in statuses:
        latest[status.device] = devices[status.device] = status
        spec, identity = program.devices.get(status.device), status.identity
        if identity is not None and (spec is None or spec.serial_no in ("", identity.serial_no)):
            identities.setdefault(status.device, identity)
    samples = dict(signals.samples)
    lost: dict[str, Sample] = {}
    for device, status in latest.items():
        if is_online(status):
            continue
        for tag in program.tags_of.get(device, ()):
            held = samples.get(tag)
            if held is not None and held.quality is not Quality.BAD:
                samples[tag] = lost[tag] = replace(held, quality=Quality.BAD, cause=QualityCause.LINK_LOST)
    return replace(signals, samples=samples, devices=devices, identities=identities), lost


def is_online(status: DeviceStatus | None) -> bool:
    """True when the device answers."""
    return status is not None and status.link in (LinkState.ONLINE, LinkState.DEGRADED)


def grow_old(program: Program, signals: Signals, now_ns: int) -> tuple[Signals, dict[str, Sample]]:
    """Mark what is too old or too long at the end of its span, and find the next time to look.

    ``due_ns`` is kept as a bound that is never late, so that most scans need not look at all.
    """
    if now_ns < signals.due_ns:
        return signals, {}
    samples = dict(signals.samples)
    aged: dict[str, Sample] = {}
    due_ns = NEVER_NS
    for tag, limit_ns in program.stale_ns.items():
        held = samples.get(tag)
        if held is not None and held.quality is Quality.BAD:
            continue
        end_ns = signals.started_ns + grace_ns(program) if held is None else held.t_ns + limit_ns
        since_ns = signals.marginal.get(tag)
        if now_ns >= end_ns:
            samples[tag] = aged[tag] = _stale(tag, held, signals.started_ns)
        elif held is not None and since_ns is not None and now_ns >= since_ns + MARGIN_NS:
            samples[tag] = aged[tag] = replace(held, quality=Quality.BAD)
        else:
            due_ns = min(due_ns, end_ns if since_ns is None else min(end_ns, since_ns + MARGIN_NS))
    return replace(signals, samples=samples if aged else signals.samples, due_ns=due_ns), aged


def grace_ns(program: Program) -> int:
    """Time of grace after the start; ten times the allowance of a paced run."""
    return max(GRACE_NS, 10 * program.options.stale_floor_ns)


def _stale(tag: str, held: Sample | None, started_ns: int) -> Sample:
    if held is None:
        return Sample(tag, math.nan, started_ns, Quality.BAD, QualityCause.NEVER_SEEN)
    return replace(held, quality=Quality.BAD, cause=QualityCause.STALE)
