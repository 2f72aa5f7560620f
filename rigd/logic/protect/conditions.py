"""Conditions: every comparison of the rig, each evaluated only when what it looks at has changed.

Cause and effect: a condition is a *channel* of its interlock or alarm. Its state is clear, active, bad (the tag cannot
be believed) or unknown (never seen, within the age allowed after the start: it neither trips nor lets anybody reset).
Tie-breaks: once active, a value must come back by the deadband, also across a bad stretch. A value beyond the span on
the tripping side is a demand, not a bad channel, so that a more extreme value never takes a demand back.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from enum import IntEnum

from rigd.model.protection import Alarm, Condition, ConditionKind, Interlock
from rigd.model.samples import Quality, QualityCause, Sample


class Channel(IntEnum):
    """State of one condition."""

    CLEAR = 0
    ACTIVE = 1
    BAD = 2
    BAD_ACTIVE = 3  # bad now, and active when it was last believed
    UNKNOWN = 4


_HIGH, _BAD = ConditionKind.HIGH, Quality.BAD
_CLEAR, _ACTIVE, _BAD_ACTIVE = Channel.CLEAR, Channel.ACTIVE, Channel.BAD_ACTIVE


@dataclass(frozen=True, slots=True)
class Watch:
    """A condition with its place in ``Conditions.channels`` and the interlock or alarm that it belongs to.

    ``tag`` is the tag that is looked at: the position tag of the unit for a mismatch, "" for what is not a tag.
    """

    index: int
    condition: Condition
    owner: str
    tag: str


@dataclass(frozen=True, slots=True)
class Told:
    """What a unit was last told, for the comparison with its feedback: target, and when it must be reached."""

    value: float
    settled_ns: int


@dataclass(frozen=True, slots=True)
class Conditions:
    """Running state of all conditions.

    ``since_ns`` holds, for each active one, the acquisition time of the sample that made it so; ``windows`` the recent
    samples of rate conditions; ``anchors`` the reference value of deviation conditions and when it last moved.
    """

    channels: tuple[Channel, ...]
    since_ns: Mapping[int, int] = field(default_factory=dict)
    windows: Mapping[int, tuple[tuple[int, float], ...]] = field(default_factory=dict)
    anchors: Mapping[int, tuple[float, int]] = field(default_factory=dict)


UNTAGGED = (ConditionKind.LINK, ConditionKind.POWER_CYCLED, ConditionKind.FAULT)
"""Kinds that look at a device or at the daemon itself; ``Condition.tag`` is then its name."""


def watches(
    interlocks: tuple[Interlock, ...], alarms: tuple[Alarm, ...], tag_of: Callable[[Condition], str]
) -> tuple[Watch, ...]:
    """All conditions of a rig in a fixed order, interlocks first."""
    found = [(one.id, condition) for one in interlocks for condition in (*one.causes, *one.witnesses)]
    for alarm in alarms:
        found += [(alarm.id, alarm.condition), *([(alarm.id, alarm.suppress)] if alarm.suppress else [])]
    return tuple(Watch(index, condition, owner, tag_of(condition)) for index, (owner, condition) in enumerate(found))


def initial(every: tuple[Watch, ...]) -> Conditions:
    """Unknown until seen; what is not a tag is clear until told, except links."""
    quiet = (ConditionKind.POWER_CYCLED, ConditionKind.FAULT)
    return Conditions(tuple(Channel.CLEAR if w.condition.kind in quiet else Channel.UNKNOWN for w in every))


def slope_per_s(window: tuple[tuple[int, float], ...]) -> float:
    """Least-squares slope of (t_ns, value) pairs [unit/s]; 0 for fewer than two instants."""
    n = len(window)
    origin = window[0][0] if window else 0
    times = [(t - origin) / 1e9 for t, _ in window]
    mean_t = sum(times) / n if n else 0.0
    spread = sum((t - mean_t) ** 2 for t in times)
    if spread == 0.0:
        return 0.0
    mean_v = sum(value for _, value in window) / n
    return sum((t - mean_t) * (v - mean_v) for t, (_, v) in zip(times, window, strict=True)) / spread


class Judge:
    """One scan's evaluation: reads the image, collects what changed. Lives for one call and is then thrown away."""

    __slots__ = (
        "_active_ns",
        "_anchors",
        "_before",
        "_channels",
        "_now_ns",
        "_samples",
        "_told",
        "_windows",
        "changed",
    )

    def __init__(
        self,
        before: Conditions,
        samples: Mapping[str, Sample],
        told: Callable[[str], Told | None],
        now_ns: int,
    ) -> None:
        self._before = before
        self._now_ns = now_ns
        self._samples = samples
        self._told = told
        self._channels: list[Channel] | None = None
        self._active_ns: dict[int, int] | None = None
        self._windows: dict[int, tuple[tuple[int, float], ...]] | None = None
        self._anchors: dict[int, tuple[float, int]] | None = None
        self.changed: list[Watch] = []

    def tag(self, watch: Watch) -> None:
        """Evaluate a condition on a tag after a new or newly judged sample."""
        sample = self._samples.get(watch.tag)
        if sample is None:
            return
        held = self._before.channels[watch.index] if self._channels is None else self._channels[watch.index]
        condition = watch.condition
        quiet = held is _CLEAR and condition.kind is _HIGH and sample.quality is not _BAD
        if quiet and sample.value <= condition.limit:  # by far the most common case: nothing changes
            return
        now = self._judge(watch, held, sample)
        if now is not held:
            self.put(watch, now, sample.t_ns if now is _ACTIVE else self._now_ns)

    def put(self, watch: Watch, channel: Channel, t_ns: int) -> None:
        """Set a channel; ``t_ns`` is when it became so."""
        if self._channels is None:
            self._channels = list(self._before.channels)
            self._active_ns = dict(self._before.since_ns)
        assert self._active_ns is not None
        if self._channels[watch.index] is channel:
            return
        self._channels[watch.index] = channel
        if channel in (Channel.CLEAR, Channel.UNKNOWN):
            self._active_ns.pop(watch.index, None)
        else:
            self._active_ns.setdefault(watch.index, t_ns)
        self.changed.append(watch)

    def result(self) -> Conditions:
        """The state after this scan; the same object when nothing changed."""
        before = self._before
        if self._channels is None and self._windows is None and self._anchors is None:
            return before
        return Conditions(
            before.channels if self._channels is None else tuple(self._channels),
            before.since_ns if self._active_ns is None else self._active_ns,
            before.windows if self._windows is None else self._windows,
            before.anchors if self._anchors is None else self._anchors,
        )

    def _judge(self, watch: Watch, channel: Channel, sample: Sample) -> Channel:
        condition = watch.condition
        kind = condition.kind
        held = channel is _ACTIVE or channel is _BAD_ACTIVE
        if sample.quality is Quality.BAD:
            if kind is ConditionKind.BAD or _OF_QUALITY.get(kind) is sample.cause:
                return _ACTIVE
            beyond = sample.cause is QualityCause.OUT_OF_SPAN or math.isinf(sample.value)
            if not (beyond and kind in _ONE_SIDED and _ONE_SIDED[kind](condition, sample.value, held)):
                return _BAD_ACTIVE if held else Channel.BAD
            return _ACTIVE
        compare = _ONE_SIDED.get(kind)
        if compare is not None:
            return _ACTIVE if compare(condition, sample.value, held) else _CLEAR
        return self._judge_other(watch, held, sample)

    def _judge_other(self, watch: Watch, held: bool, sample: Sample) -> Channel:
        condition = watch.condition
        match condition.kind:
            case ConditionKind.EQUALS:
                demand = sample.value == condition.limit
            case ConditionKind.DIFFERS:
                demand = sample.value != condition.limit
            case ConditionKind.RATE:
                demand = self._rate(watch, held, sample)
            case ConditionKind.MISMATCH:
                demand = self._mismatch(watch, sample)
            case ConditionKind.DEVIATION | ConditionKind.DISCREPANCY:
                return self._deviation(watch, held, sample)
            case _:
                demand = False
        return _ACTIVE if demand else _CLEAR

    def _rate(self, watch: Watch, held: bool, sample: Sample) -> bool:
        condition = watch.condition
        if self._windows is None:
            self._windows = dict(self._before.windows)
        start_ns = sample.t_ns - condition.window_ns
        kept = tuple(p for p in self._windows.get(watch.index, ()) if start_ns <= p[0] < sample.t_ns)
        window = (*kept, (sample.t_ns, sample.value))
        self._windows[watch.index] = window
        if len(window) < MIN_RATE_SAMPLES or 2 * (sample.t_ns - window[0][0]) < condition.window_ns:
            return held
        sign = -1.0 if condition.limit < 0 else 1.0
        threshold = abs(condition.limit) - (condition.deadband if held else 0.0)
        return sign * slope_per_s(window) > threshold

    def _deviation(self, watch: Watch, held: bool, sample: Sample) -> Channel:
        condition = watch.condition
        reference = self._samples.get(condition.reference)
        if reference is None:
            return Channel.UNKNOWN
        if reference.quality is Quality.BAD:
            return _BAD_ACTIVE if held else Channel.BAD
        if condition.kind is ConditionKind.DEVIATION and self._settling(watch, reference, sample):
            return _CLEAR
        threshold = condition.limit - (condition.deadband if held else 0.0)
        return _ACTIVE if abs(sample.value - reference.value) > threshold else _CLEAR

    def _settling(self, watch: Watch, reference: Sample, sample: Sample) -> bool:
        """True for a stated time after the reference moved by more than half the limit."""
        condition = watch.condition
        anchors = self._before.anchors if self._anchors is None else self._anchors
        anchor = anchors.get(watch.index)
        if anchor is None or abs(reference.value - anchor[0]) > 0.5 * condition.limit:
            anchor = (reference.value, reference.t_ns)
            self._anchors = {**anchors, watch.index: anchor}
        return max(sample.t_ns, reference.t_ns) - anchor[1] < condition.settling_ns

    def _mismatch(self, watch: Watch, sample: Sample) -> bool:
        told, limit = self._told(watch.tag), watch.condition.limit
        if told is None or sample.t_ns < told.settled_ns:
            return limit == 0.0 and sample.value == LOST  # a position; of a quantity it would be a value like others
        return abs(sample.value - told.value) > limit


_OF_QUALITY = {
    ConditionKind.STALE: QualityCause.STALE,
    ConditionKind.FROZEN: QualityCause.FROZEN,
    ConditionKind.OUT_OF_SPAN: QualityCause.OUT_OF_SPAN,
    ConditionKind.DIAGNOSTIC: QualityCause.SENSOR_FAULT,
}
"""Conditions on one cause of bad quality; bad for another cause is a bad channel, as everywhere."""

MIN_RATE_SAMPLES = 5
"""Fewer samples in the window say nothing about a slope (proposal after ISA-18.2 practice; no source)."""

LOST = -2.0
"""Position of a valve that does not know where it is (``rigd.model.devices.VALVE_LOST``)."""


def _high(condition: Condition, value: float, held: bool) -> bool:
    return value > (condition.limit - condition.deadband if held else condition.limit)


def _low(condition: Condition, value: float, held: bool) -> bool:
    return value < (condition.limit + condition.deadband if held else condition.limit)


_ONE_SIDED: dict[ConditionKind, Callable[[Condition, float, bool], bool]] = {
    ConditionKind.HIGH: _high,
    ConditionKind.LOW: _low,
}
