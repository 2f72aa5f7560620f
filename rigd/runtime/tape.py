"""What a rehearsal keeps when nobody wants a journal: the digest of all decisions, the peaks, the events."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import Any

from rigd.model.events import Event
from rigd.model.orders import Order
from rigd.model.samples import Quality, Sample


@dataclass(slots=True)
class Tape:
    """Grows while the run goes on. Of the tag ``follow`` it keeps every good value."""

    follow: str = ""
    hash: Any = field(default_factory=hashlib.sha256)
    peak: dict[str, float] = field(default_factory=dict)
    events: list[Event] = field(default_factory=list)
    followed: list[tuple[int, float]] = field(default_factory=list)

    def samples(self, samples: Iterable[Sample]) -> None:
        for sample in samples:
            if sample.quality is Quality.GOOD and sample.value > self.peak.get(sample.tag, float("-inf")):
                self.peak[sample.tag] = sample.value
            if sample.tag == self.follow and sample.quality is not Quality.BAD:
                self.followed.append((sample.t_ns, sample.value))

    def decided(self, orders: Sequence[Order], events: Sequence[Event]) -> None:
        for order in orders:
            self._line([order.number, order.unit, order.action, order.value, int(order.authority), order.t_ns])
        for event in events:
            self._line([event.kind, event.subject, event.t_ns, event.text, dict(sorted(event.fields.items()))])
            self.events.append(event)

    def _line(self, values: Sequence[object]) -> None:
        self.hash.update(json.dumps(values, ensure_ascii=False, separators=(",", ":")).encode())
