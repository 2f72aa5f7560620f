"""Running means of tags over the steady stretch of a point."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from rigd.logic.view import View


@dataclass(frozen=True, slots=True)
class Means:
    """Sums and counts per tag."""

    sums: Mapping[str, float] = field(default_factory=dict)
    counts: Mapping[str, int] = field(default_factory=dict)

    def add(self, view: View, tags: tuple[str, ...]) -> Means:
        """Take the new samples of this scan that are not bad."""
        fresh = {tag: view.value(tag) for tag in tags if tag in view.fresh}
        new = {tag: value for tag, value in fresh.items() if value is not None}
        if not new:
            return self
        sums = {**self.sums, **{tag: self.sums.get(tag, 0.0) + value for tag, value in new.items()}}
        counts = {**self.counts, **{tag: self.counts.get(tag, 0) + 1 for tag in new}}
        return Means(sums, counts)

    def mean(self, tag: str) -> float:
        """The mean; ``nan`` when nothing was seen."""
        count = self.counts.get(tag, 0)
        return self.sums[tag] / count if count else math.nan

    def values(self) -> dict[str, float]:
        """All means, and how many samples each has under ``<tag>.n``."""
        found: dict[str, float] = {}
        for tag, count in sorted(self.counts.items()):
            found[tag] = self.sums[tag] / count
            found[f"{tag}.n"] = float(count)
        return found


def merged(rows: tuple[Means, ...]) -> Means:
    """All of them as one."""
    sums: dict[str, float] = {}
    counts: dict[str, int] = {}
    for row in rows:
        for tag, count in row.counts.items():
            sums[tag] = sums.get(tag, 0.0) + row.sums[tag]
            counts[tag] = counts.get(tag, 0) + count
    return Means(sums, counts)
