"""What a measured figure is: a value, the floor taken in the same run, the number to hold, and whether it was held."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from enum import IntEnum


class Scale(IntEnum):
    """How much is measured: a second for a test, a few minutes, or as long as the figure asks for."""

    QUICK = 0
    NORMAL = 1
    FULL = 2

    def pick(self, quick: int, normal: int, full: int) -> int:
        """The size that belongs to this scale."""
        return (quick, normal, full)[self]


@dataclass(frozen=True, slots=True)
class Target:
    """Limits on the value and on its ratio to the floor; what is not given is not asked for."""

    value_max: float = math.inf
    value_min: float = -math.inf
    ratio_max: float = math.inf
    ratio_min: float = -math.inf

    def held(self, value: float, ratio: float | None) -> bool | None:
        """True, False, or ``None`` when nothing is asked for."""
        if self == Target():
            return None
        of_value = self.value_min <= value <= self.value_max
        of_ratio = ratio is None or self.ratio_min <= ratio <= self.ratio_max
        return of_value and of_ratio

    def words(self, unit: str) -> str:
        """As in the table: ``<= 0.2 ms, <= 2 x``."""
        parts = [f"<= {self.value_max:g} {unit}"] if math.isfinite(self.value_max) else []
        parts += [f">= {self.value_min:g} {unit}"] if math.isfinite(self.value_min) else []
        parts += [f"<= {self.ratio_max:g} x"] if math.isfinite(self.ratio_max) else []
        parts += [f">= {self.ratio_min:g} x"] if math.isfinite(self.ratio_min) else []
        return ", ".join(part.replace("  ", " ").strip() for part in parts)


NO_TARGET = Target()


@dataclass(frozen=True, slots=True)
class Figure:
    """One row. ``value`` is ``None`` when it could not be measured, and ``note`` then says why.

    ``floor`` has the value's unit; ``floor_what`` says what it is. ``detail`` goes to the JSON only.
    """

    id: str
    what: str
    unit: str = ""
    value: float | None = None
    floor: float | None = None
    floor_what: str = ""
    target: Target = NO_TARGET
    note: str = ""
    failed: bool = False
    detail: dict[str, object] = field(default_factory=dict)

    @property
    def ratio(self) -> float | None:
        """Value over floor."""
        return self.value / self.floor if self.value is not None and self.floor else None

    @property
    def held(self) -> bool | None:
        """Whether the number holds; ``None`` without a value or a target."""
        return None if self.value is None else self.target.held(self.value, self.ratio)

    def facts(self) -> dict[str, object]:
        """For the JSON."""
        limits = {name: getattr(self.target, name) for name in Target.__slots__}
        return {
            "id": self.id,
            "what": self.what,
            "unit": self.unit,
            "value": self.value,
            "floor": self.floor,
            "floor_what": self.floor_what,
            "ratio": self.ratio,
            "target": {name: limit for name, limit in limits.items() if math.isfinite(limit)},
            "held": self.held,
            "note": self.note,
            "failed": self.failed,
            **({"detail": self.detail} if self.detail else {}),
        }


Group = Callable[[Scale], Iterable[Figure]]


def not_built(name: str, what: str, target: Target, unit: str = "") -> Figure:
    """A row for something that does not exist yet: no number at all."""
    return Figure(name, what, unit, target=target, note="not built yet")


def median(values: Sequence[float]) -> float:
    """The middle one."""
    return quantile(values, 0.5)


def quantile(values: Sequence[float], share: float) -> float:
    """The value that ``share`` of all do not exceed (nearest rank); share 1 is the worst."""
    ordered = sorted(values)
    return ordered[max(0, math.ceil(share * len(ordered)) - 1)]


def exponent(sizes: Sequence[float], costs: Sequence[float]) -> float:
    """Least-squares slope of log cost over log size."""
    x, y = [math.log(size) for size in sizes], [math.log(cost) for cost in costs]
    mean_x, mean_y = sum(x) / len(x), sum(y) / len(y)
    above = sum((a - mean_x) * (b - mean_y) for a, b in zip(x, y, strict=True))
    return above / sum((a - mean_x) ** 2 for a in x)
