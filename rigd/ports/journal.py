"""The record of a run: inputs before they are acted on, then what was decided."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

from rigd.model.events import Event
from rigd.model.intake import Intake
from rigd.model.orders import Order
from rigd.model.samples import Spectrum


class Journal(Protocol):
    """An append-only run journal. No call waits for the disk; ``trouble`` tells when the disk does not keep up."""

    def scan(self, number: int, now_ns: int, utc: str, intake: Intake) -> None:
        """Record the inputs of a scan, before it is decided."""

    def decided(self, number: int, orders: Sequence[Order], events: Sequence[Event]) -> None:
        """Record what a scan decided."""

    def spectrum(self, spectrum: Spectrum) -> None:
        """Record a raw spectrum."""

    def bytes_seen(self, link: str, t_ns: int, sent: bool, data: bytes) -> None:
        """Record raw bytes of a link, when the link is traced."""

    def trouble(self) -> str:
        """Why the journal is not being written, or "" when all is well."""

    def close(self, outcome: str) -> None:
        """Write what is queued, the outcome, and end the file cleanly; waits."""
