"""Comparisons as written -> conditions with numbers in the unit of their tag."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations

from pydantic_core import PydanticCustomError

from rigd.config.findings import Findings, listed, nearest
from rigd.config.lines import Path
from rigd.config.quantity import Sign, read_quantity
from rigd.config.rule_tables import COMPARISONS, ConditionTable, difference
from rigd.config.table import ns
from rigd.model.protection import Condition, ConditionKind
from rigd.model.rig import Tag, TagKind
from rigd.model.units import HOUSE

DIMENSIONS = {unit: dimension for dimension, unit in HOUSE.items()}
_SLOPES = {"pressure": ("pressure rate", 1.0), "temperature": ("temperature rate", 1 / 60), "volume": ("flow", 1 / 60)}
"""Dimension of a slope as people write it, and the factor to house units per second."""

RATE_PERIODS = 20
"""Default window of a slope in sample periods."""
FEWEST_RATE_PERIODS = 5
"""A slope by least squares needs at least five samples (common practice, no source)."""


class ConditionMaker:
    """Makes conditions for the tags of one rig; what is wrong becomes a finding and ``None``."""

    def __init__(self, tags: Mapping[str, Tag], unusable: frozenset[str], found: Findings) -> None:
        self._tags = tags
        self._unusable = unusable
        self._found = found

    def make(self, table: ConditionTable, place: Path, settling_s: float = 0.0) -> Condition | None:
        """The condition, or ``None`` after a finding. ``settling_s`` belongs to comparisons with another tag."""
        tag = self.tag(table.tag, (*place, "tag"))
        if tag is None:
            return None
        try:
            return self._compared(table, tag, place, settling_s)
        except PydanticCustomError as error:
            key = error.context.get("key", "") if error.context else ""
            example = f"the tag {tag.id} is measured in {tag.unit or 'positions or states'}"
            self._found.error(error.type, (*place, key) if key else place, error.message(), example)
            return None

    def tag(self, name: str, place: Path) -> Tag | None:
        """The tag of this name; a finding when there is none."""
        if name not in self._tags and name not in self._unusable:
            message = f"the rig has no tag {name!r}{nearest(name, self._tags)}"
            self._found.error("tag-unknown", place, message, f"known tags: {listed(self._tags)}")
        return self._tags.get(name)

    def _compared(self, table: ConditionTable, tag: Tag, place: Path, settling_s: float) -> Condition | None:
        if table.equals is not None:
            return Condition(ConditionKind.EQUALS, tag.id, _state(tag, table.equals))
        if table.quality is not None:
            return Condition(ConditionKind(table.quality), tag.id)
        dimension = DIMENSIONS.get(tag.unit, "")
        if not dimension:
            key = next(key for key in COMPARISONS if getattr(table, key) is not None)
            text = f"{tag.id} is a position or state and cannot be compared with {key!r}"
            raise _wrong("comparison-wrong", text, key)
        deadband = 0.0
        if table.deadband is not None:
            deadband = _read(table.deadband, difference(dimension), "deadband", "not negative")
        if table.other is not None:
            return self._apart(table, tag, dimension, deadband, (place, settling_s))
        if table.mismatch_by is not None:
            return _mismatch(table.mismatch_by, tag, dimension)
        if table.rate_above is not None:
            return self._rate(table, tag, dimension, deadband)
        if table.above is not None:
            return Condition(ConditionKind.HIGH, tag.id, _read(table.above, dimension, "above"), deadband)
        return Condition(ConditionKind.LOW, tag.id, _read(table.below or "", dimension, "below"), deadband)

    def _apart(
        self, table: ConditionTable, tag: Tag, dimension: str, deadband: float, at: tuple[Path, float]
    ) -> Condition | None:
        """A comparison with another tag: a set-point that may move, or a partner that should agree."""
        place, settling_s = at
        key = "differs_from" if table.differs_from is not None else "disagrees_with"
        other = self.tag(table.other or "", (*place, key))
        if other is None:
            return None
        if other.unit != tag.unit:
            text = f"{tag.id} is in {tag.unit}, but {other.id} is in {other.unit or 'positions or states'}"
            raise _wrong("unit-wrong", text, key)
        if other.id == tag.id:
            raise _wrong("comparison-wrong", f"{tag.id} always agrees with itself", key)
        limit = _read(table.by or "", difference(dimension), "by", "positive")
        if key == "disagrees_with":
            return Condition(ConditionKind.DISCREPANCY, tag.id, limit, deadband, other.id)
        return Condition(ConditionKind.DEVIATION, tag.id, limit, deadband, other.id, settling_ns=ns(settling_s))

    def witnesses(self, causes: Sequence[Condition], by: str, place: Path) -> tuple[Condition, ...]:
        """Every pair of channels of an interlock, compared; a finding and nothing when they cannot be."""
        tags = [self._tags[name] for name in dict.fromkeys(cause.tag for cause in causes)]
        try:
            if len(tags) < 2 or len({tag.unit for tag in tags}) > 1:
                text = "'disagree_by' compares channels: trip_when needs two tags of the same unit"
                raise _wrong("comparison-wrong", text, "disagree_by")
            dimension = DIMENSIONS.get(tags[0].unit, "")
            if not dimension:
                raise _wrong("comparison-wrong", f"{tags[0].id} is a position or state", "disagree_by")
            limit = _read(by, difference(dimension), "disagree_by", "positive")
        except PydanticCustomError as error:
            self._found.error(error.type, (*place, "disagree_by"), error.message(), "remove it, or add a second sensor")
            return ()
        kind = ConditionKind.DISCREPANCY
        return tuple(Condition(kind, a.id, limit, reference=b.id) for a, b in combinations(tags, 2))

    def _rate(self, table: ConditionTable, tag: Tag, dimension: str, deadband: float) -> Condition:
        slope, factor = _SLOPES.get(dimension, ("", 0.0))
        if not slope:
            raise _wrong(
                "comparison-wrong", f"{tag.id} is a {dimension}; its slope is not a quantity here", "rate_above"
            )
        window_ns = RATE_PERIODS * tag.period_ns if table.window is None else ns(table.window)
        if window_ns < FEWEST_RATE_PERIODS * tag.period_ns:
            text = (
                f"{tag.id} is read every {tag.period_ns / 1e9:g} s; the window must hold {FEWEST_RATE_PERIODS} samples"
            )
            raise _wrong("window-short", text, "window")
        limit = _read(table.rate_above or "", slope, "rate_above") * factor
        return Condition(ConditionKind.RATE, tag.id, limit, deadband * factor, window_ns=window_ns)


_FOLLOWS = ("flow", "setpoint")
"""Feedback of a quantity that a unit was told; positions have their own built-in interlocks."""


def _mismatch(text: str, tag: Tag, dimension: str) -> Condition:
    if tag.kind is not TagKind.FEEDBACK or tag.channel not in _FOLLOWS:
        reason = f"{tag.id} is not the feedback of an order; a pump has '.flow', a chiller '.setpoint'"
        raise _wrong("comparison-wrong", reason, "mismatch_by")
    limit = _read(text, difference(dimension), "mismatch_by", "positive")
    return Condition(ConditionKind.MISMATCH, tag.id, limit)


def _state(tag: Tag, value: str | int) -> float:
    """A label or number of a state as its number."""
    if not tag.labels:
        text = f"{tag.id} is in {tag.unit} and has no states; 'equals' needs a position or state"
        raise _wrong("comparison-wrong", text, "equals")
    if isinstance(value, int) and value < len(tag.labels):
        return float(value)
    if value in tag.labels:
        return float(tag.labels.index(str(value)))
    hint = nearest(value, tag.labels) if isinstance(value, str) else ""
    raise _wrong("state-unknown", f"{tag.id} has no state {value!r}; it has {listed(tag.labels)}{hint}", "equals")


def _read(text: str, dimension: str, key: str, sign: Sign = "any") -> float:
    try:
        return read_quantity(text, dimension, sign)
    except PydanticCustomError as error:
        raise _wrong(error.type, error.message(), key) from None


def _wrong(code: str, text: str, key: str) -> PydanticCustomError:
    return PydanticCustomError(code, "{text}", {"text": text, "key": key})
